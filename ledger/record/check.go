package record

import (
	"errors"
	"fmt"
	"reflect"
	"slices"
	"unicode"
	"unicode/utf8"

	"github.com/fxamacker/cbor/v2"
)

// EncodeBody returns a body's deterministic CBOR after checking it. The error is ErrMalformed with what is wrong;
// for an Unknown and for the body in a Correction also ErrNotCanonical.
func EncodeBody(kind Kind, body any) ([]byte, error) {
	empty, known := newBody[kind]
	if u, ok := body.(Unknown); ok && !known {
		return u.Raw, checkUnknown(u.Raw)
	}
	if !known || reflect.TypeOf(empty()).Elem() != reflect.TypeOf(body) {
		return nil, malformed("a %T is not the body of a %q", body, kind)
	}
	if err := checkBody(body); err != nil {
		return nil, err
	}
	return encoding.Marshal(body)
}

// DecodeBody reads the body of a kind, strictly. A kind that is not known gives Unknown.
func DecodeBody(kind Kind, raw []byte) (any, error) { return decodeBody(kind, raw, strict) }

func decodeBody(kind Kind, raw []byte, read func([]byte, any) error) (any, error) {
	empty, known := newBody[kind]
	if !known {
		if err := checkUnknown(raw); err != nil {
			return nil, err
		}
		return Unknown{slices.Clone(raw)}, nil
	}
	into := empty()
	if err := read(raw, into); err != nil {
		return nil, err
	}
	body := reflect.ValueOf(into).Elem().Interface()
	if err := checkBody(body); err != nil {
		return nil, err
	}
	return body, nil
}

// checkUnknown holds a body that cannot be understood to what every kind keeps, now and later: a deterministic map with
// unsigned integer keys, and no floats.
func checkUnknown(raw []byte) error {
	var fields map[uint64]cbor.RawMessage
	if err := decoding.Unmarshal(raw, &fields); err != nil || fields == nil {
		return malformed("the body is not a map with integer keys")
	}
	var v any
	if err := strict(raw, &v); err != nil {
		return err
	}
	if hasFloat(v) {
		return malformed("the body holds a float")
	}
	return nil
}

func hasFloat(v any) bool {
	switch v := v.(type) {
	case float64:
		return true
	case []any:
		return slices.ContainsFunc(v, hasFloat)
	case map[any]any:
		for k, e := range v {
			if hasFloat(k) || hasFloat(e) {
				return true
			}
		}
	}
	return false
}

var newBody = map[Kind]func() any{
	KindFounding:       func() any { return new(Founding) },
	KindHandAdmitted:   func() any { return new(HandAdmitted) },
	KindKeyAdded:       func() any { return new(KeyAdded) },
	KindKeyRetired:     func() any { return new(KeyRetired) },
	KindSheet:          func() any { return new(Sheet) },
	KindUnitRegistered: func() any { return new(UnitRegistered) },
	KindUnitFitted:     func() any { return new(UnitFitted) },
	KindUnitRemoved:    func() any { return new(UnitRemoved) },
	KindGauge:          func() any { return new(Gauge) },
	KindReading:        func() any { return new(Reading) },
	KindCharge:         func() any { return new(Charge) },
	KindCorrection:     func() any { return new(Correction) },
	KindWithdrawal:     func() any { return new(Withdrawal) },
	KindCountersign:    func() any { return new(Countersign) },
	KindBottle:         func() any { return new(Bottle) },
	KindSettling:       func() any { return new(Settling) },
	KindHold:           func() any { return new(Hold) },
	KindTrace:          func() any { return new(Trace) },
	KindRecall:         func() any { return new(Recall) },
	KindSnag:           func() any { return new(Snag) },
	KindSnagCleared:    func() any { return new(SnagCleared) },
	KindHandover:       func() any { return new(Handover) },
}

func malformed(format string, args ...any) error {
	return fmt.Errorf("%w: %s", ErrMalformed, fmt.Sprintf(format, args...))
}

func checkText(name, s string, required bool) error {
	switch {
	case required && s == "":
		return malformed("%s is empty", name)
	case len(s) > maxText:
		return malformed("%s is %d bytes long, more than %d", name, len(s), maxText)
	case !utf8.ValidString(s):
		return malformed("%s is not UTF-8", name)
	}
	for _, r := range s {
		if unicode.IsControl(r) {
			return malformed("%s holds the control character %U", name, r)
		}
	}
	return nil
}

func (a Amount) check(name string) error {
	if a.Exponent < -9 || a.Exponent > 9 {
		return malformed("%s has the exponent %d", name, a.Exponent)
	}
	if len(a.Unit) > 12 {
		return malformed("%s has the unit %q", name, a.Unit)
	}
	return checkText("the unit of "+name, a.Unit, true)
}

// maxSeries keeps a series well inside an entry.
const maxSeries = 500

func (s Series) check(name string) error {
	if len(s.Values) < 2 || len(s.Values) > maxSeries {
		return malformed("%s has %d values; 2 to %d", name, len(s.Values), maxSeries)
	}
	return Amount{Exponent: s.Exponent, Unit: s.Unit}.check(name)
}

// checkPairs holds two series to one length, and the first to rising values.
func checkPairs(x, y Series) error {
	if len(x.Values) != len(y.Values) {
		return malformed("%d values beside %d", len(x.Values), len(y.Values))
	}
	for i := 1; i < len(x.Values); i++ {
		if x.Values[i] <= x.Values[i-1] {
			return malformed("value %d of the series is not after the one before it", i+1)
		}
	}
	return nil
}

func (t Time) check() error {
	if t.OffsetMin < -maxOffset || t.OffsetMin > maxOffset || t.Unix < 0 || t.Unix > maxUnix {
		return malformed("the time %d with offset %d min cannot be", t.Unix, t.OffsetMin)
	}
	return nil
}

// maxSoak is in minutes, some 69 days: beyond it a soak says nothing, and a duration could overflow.
const maxSoak = 100_000

// maxNoticed is how much can be noticed beside one reading.
const maxNoticed = 20

// maxOpen is how many open matters a handover can state.
const maxOpen = 100

// optionalID are the ids that may be absent.
var optionalID = []string{"LastID", "Sheet", "Takes"}

// optionalText are the text fields that may be empty; all others must say something.
var optionalText = []string{"Certificate", "Note", "Override", "Construction", "Valve", "Torque", "Label"}

// checkBody walks a body's fields: texts, amounts and times have one rule each wherever they stand. What is left is special.
func checkBody(body any) error {
	if err := checkFields(reflect.ValueOf(body)); err != nil {
		return err
	}
	switch b := body.(type) {
	case Founding:
		return checkRoles(b.Roles)
	case HandAdmitted:
		return errors.Join(checkRoles(b.Roles), CheckKey(b.Key))
	case KeyAdded:
		return CheckKey(b.Key)
	case KeyRetired:
		if b.LastSeq == 0 && b.LastID != (ID{}) {
			return malformed("a last entry is named, and its number is 0")
		}
	case Sheet:
		if (b.Charge == nil) == (len(b.Chart) == 0) {
			return malformed("a sheet holds a reference charge or a chart, one of the two")
		}
		if (b.Charge == nil) != (b.Minus == nil) || (b.Charge == nil) != (b.Plus == nil) {
			return malformed("a reference charge has a tolerance below and above it, and a chart has none")
		}
	case Gauge:
		if b.Due.Unix < b.Calibrated.Unix {
			return malformed("the calibration is due before it was done")
		}
	case Correction:
		// What may correct what is the book's question; that the body is one of its kind is asked here, so that nothing
		// with a float or a bad text hides in it.
		if b.Kind == KindCorrection {
			return malformed("a correction of a correction; correct the entry itself once more")
		}
		if _, err := DecodeBody(b.Kind, b.Body); err != nil {
			return fmt.Errorf("corrected %s: %w", b.Kind, err)
		}
	case Countersign:
		if len(b.Of) == 0 || len(b.Of) > 100 {
			return malformed("it countersigns %d entries", len(b.Of))
		}
		for i, id := range b.Of {
			if id == (ID{}) || slices.Contains(b.Of[:i], id) {
				return malformed("it countersigns %s twice, or nothing", id.Short())
			}
		}
	case Settling:
		return checkPairs(b.Seconds, b.Pressures)
	case Trace:
		return errors.Join(checkFrom(b.From), checkPairs(b.Drawn, b.Pressures))
	case Hold:
		if b.Start == b.End {
			return malformed("a hold test that starts and ends with one reading")
		}
	case Recall:
		if (b.Gauge == "") == (b.Sheet == ID{}) {
			return malformed("a recall names a gauge or a sheet, one of the two")
		}
		if b.Gauge == "" && b.Correction != nil {
			return malformed("a sheet has no correction; enter its right revision")
		}
	case Reading:
		return checkFrom(b.TemperatureFrom)
	case Charge:
		return errors.Join(checkFrom(b.AsFound.TemperatureFrom), checkFrom(b.AsLeft.TemperatureFrom))
	}
	return nil
}

func checkFields(v reflect.Value) error {
	for i := range v.NumField() {
		f, name := v.Field(i), v.Type().Field(i).Name
		if !v.Type().Field(i).IsExported() { // the marker of a struct that is written as an array
			continue
		}
		if f.Kind() == reflect.Pointer && !f.IsNil() {
			f = f.Elem()
		}
		var err error
		switch x := f.Interface().(type) {
		case Amount:
			err = x.check(name)
		case Time:
			err = x.check()
		case ID:
			if x == (ID{}) && !slices.Contains(optionalID, name) {
				err = malformed("%s names no entry", name)
			}
		case KeyID:
			if x == (KeyID{}) {
				err = malformed("%s names no key", name)
			}
		case uint64:
			if name == "SoakMin" && x > maxSoak {
				err = malformed("a soak of %d minutes; at most %d", x, maxSoak)
			}
		case Kind:
			err = checkText(name, string(x), true)
		case string:
			_, recall := v.Interface().(Recall) // names one of two
			err = checkText(name, x, !slices.Contains(optionalText, name) && !recall || name == "Reason")
		case []string:
			if most := map[string]int{"Seen": maxNoticed, "Open": maxOpen}[name]; len(x) > most {
				err = malformed("%s holds %d things; at most %d", name, len(x), most)
			}
			for _, words := range x {
				err = errors.Join(err, checkText(name, words, true))
			}
		case UnitRef:
			err = errors.Join(checkText("part", x.Part, true), checkText("serial", x.Serial, true))
		case Observation:
			err = checkFields(f)
		case Series:
			err = x.check(name)
		case []ChartRow:
			for _, r := range x {
				err = errors.Join(err, checkFields(reflect.ValueOf(r)))
			}
		case []CalPoint:
			for _, r := range x {
				err = errors.Join(err, checkFields(reflect.ValueOf(r)))
			}
		}
		if err != nil {
			return err
		}
	}
	return nil
}

func checkRoles(roles []Role) error {
	for i, r := range roles {
		if !r.Known() || slices.Contains(roles[:i], r) {
			return malformed("role %q", r)
		}
	}
	if len(roles) == 0 {
		return malformed("no role")
	}
	return nil
}

func checkFrom(s string) error {
	if s != "shell" && s != "ambient" && s != "unknown" {
		return malformed("the temperature is from %q; it is from shell, ambient or unknown", s)
	}
	return nil
}
