package record

import (
	"fmt"
	"os"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"
)

// entry.cddl and the structs name the same keys, and call the same ones optional.
func TestCDDLNamesEveryKey(t *testing.T) {
	text, err := os.ReadFile("entry.cddl")
	if err != nil {
		t.Fatal(err)
	}
	comment := regexp.MustCompile(`;.*`)
	cddl := comment.ReplaceAllString(string(text), "")
	rules := map[string]any{"header": header{}, "statement": payload{}, "observation": Observation{}}
	for kind, empty := range newBody {
		rules[string(kind)] = reflect.ValueOf(empty()).Elem().Interface()
		if !strings.Contains(cddl, fmt.Sprintf("statement<%q, %s>", kind, kind)) {
			t.Errorf("no statement of a %q", kind)
		}
	}
	choices := map[string][]string{"sheet": {"10", "11", "12", "13"}, "recall": {"1", "2"}}
	key := regexp.MustCompile(`(\? *)?\b(\d+): `)
	for name, v := range rules {
		m := regexp.MustCompile(`(?ms)^` + name + `(?:<kind, body>)? = \{(.*?)\}$`).FindStringSubmatch(strings.ReplaceAll(cddl, "} \n", "}\n"))
		if m == nil {
			t.Errorf("no rule %s", name)
			continue
		}
		body, either, _ := strings.Cut(m[1], "//") // of a choice of groups, all keys are optional in Go
		var got, want []string
		for _, k := range key.FindAllStringSubmatch(body+either, -1) {
			optional := k[1] != "" || slices.Contains(choices[name], k[2])
			got = append(got, fmt.Sprint(k[2], optional))
		}
		for f := range reflect.TypeOf(v).Fields() {
			tag := strings.Split(f.Tag.Get("cbor"), ",")
			want = append(want, fmt.Sprint(tag[0], slices.Contains(tag, "omitempty") || slices.Contains(tag, "omitzero")))
		}
		if !slices.Equal(got, want) {
			t.Errorf("%s: keys in entry.cddl (key, optional) %v, in Go %v", name, got, want)
		}
	}
}

// A reading with all that is usual on the line stays well under 512 bytes; the longest of everything stays under MaxSize or is
// refused, never cut.
func TestSizes(t *testing.T) {
	reading := bodies(t)[KindReading].(Reading)
	for _, heads := range []int{0, 1, 2, 3} {
		e := entryOf(KindReading, reading)
		e.Seen = nil
		for i := range heads {
			e.Seen = append(e.Seen, ID{2, byte(i)})
		}
		v, err := Sign(rfcKey(t), BookID{0xb0}, e)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("a reading that names %d new heads: %d bytes", heads, len(v.Raw()))
		if len(v.Raw()) >= 512 {
			t.Errorf("%d bytes, want under 512", len(v.Raw()))
		}
	}
	e := entryOf(KindReading, reading)
	e.Seen = nil
	for i := range 600 {
		e.Seen = append(e.Seen, ID{2, byte(i >> 8), byte(i)})
	}
	if _, err := Sign(rfcKey(t), BookID{0xb0}, e); err == nil || err != ErrTooLarge {
		t.Errorf("600 heads: %v", err)
	}
}
