package record

import (
	"errors"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"github.com/fxamacker/cbor/v2"
)

// full sets every optional field that the kind's rules allow beside the others.
func full(kind Kind, body any) any {
	v := reflect.New(reflect.TypeOf(body)).Elem()
	v.Set(reflect.ValueOf(body))
	five := uint64(5)
	for i := range v.NumField() {
		f := v.Field(i)
		if !v.Type().Field(i).IsExported() || !f.IsZero() {
			continue
		}
		var sample any
		switch f.Interface().(type) {
		case *Amount:
			sample = &psi
		case string:
			sample = "words"
		case ID:
			sample = ID{1}
		case *uint64:
			sample = &five
		case bool:
			sample = true
		case []ChartRow:
			sample = []ChartRow{row}
		case []CalPoint:
			sample = []CalPoint{{Reading: psi, Correction: psi}}
		default:
			continue
		}
		f.Set(reflect.ValueOf(sample))
		if _, err := EncodeBody(kind, v.Interface()); err != nil {
			f.SetZero()
		}
	}
	return v.Interface()
}

// entry.cddl takes every kind of real entry, bytes as they lie on the disk.
func TestCDDLTakesRealEntries(t *testing.T) {
	entry := readCDDL(t, "", "").rule("entry", nil)
	files, err := filepath.Glob("testdata/golden/*.hex")
	if err != nil || len(files) != len(newBody) {
		t.Fatalf("%d golden entries of %d kinds, %v", len(files), len(newBody), err)
	}
	takes := func(raw []byte) bool {
		var v any
		return cbor.Unmarshal(raw, &v) == nil && entry(v)
	}
	for _, name := range files {
		text, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		if !takes(unhex(t, strings.TrimSpace(string(text)))) {
			t.Errorf("entry.cddl does not take %s", name)
		}
	}
	for kind, body := range bodies(t) {
		v, err := Sign(rfcKey(t), BookID{0xb0}, entryOf(kind, full(kind, body)))
		if err != nil {
			t.Fatal(kind, err)
		}
		if !takes(v.Raw()) {
			t.Errorf("entry.cddl does not take a %s with all that is optional", kind)
		}
	}
}

var samples = []any{uint64(5), int64(-1), uint64(1) << 60, "words", "shell", strings.Repeat("w", 2001), make([]byte, 16), append(make([]byte, 31), 1), true, nil, map[any]any{}, []any{}, []any{uint64(5), int64(-1), "psi"}, []any{uint64(5), uint64(0)}, []any{"part", "serial"}, []any{uint64(5)}, 1.5}

// variants calls try with each copy of v in which one thing is different, so many levels down.
func variants(v any, deep int, at string, try func(with any, what string)) {
	switch v := v.(type) {
	case map[any]any:
		edit := func(f func(map[any]any), what string) {
			with := maps.Clone(v)
			f(with)
			try(with, at+what)
		}
		for key, old := range v {
			edit(func(m map[any]any) { delete(m, key) }, fmt.Sprintf(" without key %v", key))
			for _, s := range samples {
				edit(func(m map[any]any) { m[key] = s }, fmt.Sprintf(" with %T %.20v as key %v", s, s, key))
			}
			if deep > 1 {
				variants(old, deep-1, fmt.Sprintf("%s key %v:", at, key), func(with any, what string) { edit(func(m map[any]any) { m[key] = with }, what) })
			}
		}
		for key := range uint64(26) {
			if _, there := v[key]; !there {
				edit(func(m map[any]any) { m[key] = "words" }, fmt.Sprintf(" with key %d besides", key))
			}
		}
	case []any:
		for i, old := range v {
			for _, s := range samples {
				with := slices.Clone(v)
				with[i] = s
				try(with, fmt.Sprintf("%s with %T %.20v in place %d", at, s, s, i))
			}
			if deep > 1 {
				variants(old, deep-1, fmt.Sprintf("%s place %d:", at, i), func(x any, what string) {
					with := slices.Clone(v)
					with[i] = x
					try(with, what)
				})
			}
		}
		try(v[:max(len(v)-1, 0)], at+" shorter")
		try(append(slices.Clone(v), uint64(5)), at+" longer by a number")
	}
}

// disagreements changes one thing at a time in each kind's body and in the payload (taken out, put in, or made of another type)
// and returns where the file and this package do not say the same of it.
func disagreements(t *testing.T, file *cddl) (differ []string, tried, refused int) {
	t.Helper()
	compare := func(kind Kind, what string, takes bool, err error) {
		tried++
		switch {
		case !takes && err == nil:
			differ = append(differ, fmt.Sprintf("a %s %s: Go takes it, entry.cddl does not", kind, what))
		case takes && err != nil && !beyondCDDL(err):
			differ = append(differ, fmt.Sprintf("a %s %s: entry.cddl takes it, Go says %v", kind, what, err))
		case !takes:
			refused++
		}
	}
	changed := func(raw []byte, deep int, try func(with any, raw []byte, what string)) {
		var v any
		if err := cbor.Unmarshal(raw, &v); err != nil {
			t.Fatal(err)
		}
		variants(v, deep, "", func(with any, what string) {
			raw, err := encoding.Marshal(with)
			if err != nil {
				t.Fatal(err)
			}
			try(with, raw, what)
		})
	}
	entry := file.rule("entry", nil)
	for kind, body := range bodies(t) {
		rule := file.rule(string(kind), nil)
		for _, b := range []any{body, full(kind, body)} {
			raw, err := EncodeBody(kind, b)
			if err != nil {
				t.Fatal(kind, err)
			}
			changed(raw, 3, func(with any, raw []byte, what string) {
				_, err := DecodeBody(kind, raw)
				compare(kind, what, rule(with), err)
			})
		}
		v, err := Sign(rfcKey(t), BookID{0xb0}, entryOf(kind, body))
		if err != nil {
			t.Fatal(kind, err)
		}
		if kind == KindFounding { // signed without a book
			continue
		}
		changed(payloadOf(t, v), 1, func(_ any, payload []byte, what string) {
			raw := resign(t, payload)
			v, err := Verify(raw, BookID{0xb0})
			if _, unread := v.entry.Body.(Unknown); unread {
				err = errors.New("kept unread, as the file says of kinds that it does not name")
			}
			var x any
			compare(kind, "entry "+what, cbor.Unmarshal(raw, &x) == nil && entry(x), err)
		})
	}
	return differ, tried, refused
}

func TestCDDLAndGoRefuseTheSame(t *testing.T) {
	differ, tried, refused := disagreements(t, readCDDL(t, "", ""))
	for _, d := range differ {
		t.Error(d)
	}
	if refused < tried/2 {
		t.Errorf("only %d of %d changes were refused", refused, tried)
	}
	t.Logf("%d changes, %d refused by both", tried, refused)
}

// A slip in the file is noticed: a key that moved, became optional or needed, or is of another type.
func TestCDDLSlipsAreNoticed(t *testing.T) {
	for _, x := range []struct{ old, now string }{
		{"withdrawal = { 1: id, 2: words }", "withdrawal = { 1: id, ? 2: words }"},
		{"withdrawal = { 1: id, 2: words }", "withdrawal = { 1: id, 2: tstr .size (1..3000), ? 3: words }"},
		{"unit-fitted = { 1: unit, 2: words", "unit-fitted = { 1: unit, 2: amount"},
		{"unit-removed = { 1: unit, 2: words, 3: wall }", "unit-removed = { 1: unit, 2: words, 4: wall }"},
		{"unit-registered = { 1: words, 2: words, ? 3: words }", "unit-registered = { 1: words, 2: words, 3: words }"},
		{"? 4: soak }", "? 4: words }"},
		{"? 19: true", "? 19: uint"},
		{"4: wall,", "? 4: wall,"},
		{"? 2: id, ", "? 2: bstr, "},
	} {
		if differ, _, _ := disagreements(t, readCDDL(t, x.old, x.now)); len(differ) == 0 {
			t.Errorf("nothing differs when entry.cddl says %q in place of %q", x.now, x.old)
		}
	}
}

// beyondCDDL are rules between values, and of the key itself, which CDDL cannot state.
func beyondCDDL(err error) bool {
	return slices.ContainsFunc([]string{"corrected ", "due before it was done", "full-strength", "of a line with", "values beside", "is not after the one before"}, func(s string) bool { return strings.Contains(err.Error(), s) })
}
