package record

import (
	"errors"
	"fmt"
	"reflect"
	"slices"
	"unicode"
	"unicode/utf8"
)

// EncodeBody returns a body's deterministic CBOR after checking it. The error is ErrMalformed with what is wrong.
func EncodeBody(kind Kind, body any) ([]byte, error) {
	if u, ok := body.(Unknown); ok {
		return u.Raw, nil
	}
	if want, ok := newBody[kind]; !ok || reflect.TypeOf(want()).Elem() != reflect.TypeOf(body) {
		return nil, fmt.Errorf("%w: a %T is not the body of a %q", ErrMalformed, body, kind)
	}
	if err := checkBody(body); err != nil {
		return nil, err
	}
	return encoding.Marshal(body)
}

// DecodeBody reads the body of a kind, strictly. A kind that is not known gives Unknown.
func DecodeBody(kind Kind, raw []byte) (any, error) {
	make, ok := newBody[kind]
	if !ok {
		return Unknown{slices.Clone(raw)}, nil
	}
	into := make()
	if err := strict(raw, into); err != nil {
		return nil, err
	}
	body := reflect.ValueOf(into).Elem().Interface()
	return body, checkBody(body)
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

func (t Time) check() error {
	if t.OffsetMin < -maxOffset || t.OffsetMin > maxOffset || t.Unix < 0 || t.Unix > 1<<38 {
		return malformed("the time %d with offset %d min cannot be", t.Unix, t.OffsetMin)
	}
	return nil
}

// optionalText are the text fields that may be empty; all others must say something.
var optionalText = []string{"Certificate", "Note", "Override", "Construction", "Valve", "Torque"}

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
		if b.Charge != nil && (b.Minus == nil || b.Plus == nil) {
			return malformed("the reference charge has no tolerance")
		}
	case Countersign:
		if len(b.Of) == 0 || len(b.Of) > 100 {
			return malformed("it countersigns %d entries", len(b.Of))
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
		case string:
			err = checkText(name, x, !slices.Contains(optionalText, name))
		case UnitRef:
			err = errors.Join(checkText("part", x.Part, true), checkText("serial", x.Serial, true))
		case Observation:
			err = checkFields(f)
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
		if !slices.Contains([]Role{RoleLead, RoleTechnician, RoleInspector, RoleAuditor}, r) || slices.Contains(roles[:i], r) {
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
