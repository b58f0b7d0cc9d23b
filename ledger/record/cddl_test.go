package record

import (
	"fmt"
	"maps"
	"math/big"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/fxamacker/cbor/v2"
)

// A reader of as much of CDDL (RFC 8610) as entry.cddl uses, so that the file can be held against real entries: it knows nothing
// of this package. No public validator of CBOR by CDDL can be had where the tests run.
type cddl struct {
	rules  map[string][]string // tokens of the right side
	params map[string][]string
}

type (
	matcher func(v any) bool
	// member is one entry of a map or array: so many values that match, under a key in a map. A choice of groups has members.
	member struct {
		least, most int
		key         *big.Int
		value       matcher
		either      [][]member
	}
	scope  map[string]matcher // generic arguments
	parser struct {
		file   *cddl
		tokens []string
		scope  scope
	}
)

var (
	cddlToken = regexp.MustCompile(`"[^"]*"|\.\.|\.[a-z]+|#6\.\d+|=>|//|[A-Za-z][A-Za-z0-9-]*|-?\d+|\S`)
	cddlRule  = regexp.MustCompile(`(?m)^([a-z][a-z0-9-]*)(?:<([^>]*)>)? = `)
)

// readCDDL reads entry.cddl, with one text put in place of another.
func readCDDL(t *testing.T, old, now string) *cddl {
	t.Helper()
	raw, err := os.ReadFile("entry.cddl")
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(raw), old) {
		t.Fatalf("entry.cddl does not say %q", old)
	}
	text := regexp.MustCompile(`;.*`).ReplaceAllString(strings.Replace(string(raw), old, now, 1), "")
	f := &cddl{map[string][]string{}, map[string][]string{}}
	at := cddlRule.FindAllStringSubmatchIndex(text, -1)
	for i, m := range at {
		end := len(text)
		if i+1 < len(at) {
			end = at[i+1][0]
		}
		name := text[m[2]:m[3]]
		if f.rules[name] != nil {
			t.Errorf("two rules %s", name)
		}
		f.rules[name] = cddlToken.FindAllString(text[m[1]:end], -1)
		if m[4] >= 0 {
			f.params[name] = strings.Split(strings.ReplaceAll(text[m[4]:m[5]], " ", ""), ",")
		}
	}
	return f
}

// rule returns the matcher of a rule, its arguments filled in.
func (f *cddl) rule(name string, args []matcher) matcher {
	tokens, ok := f.rules[name]
	if !ok || len(args) != len(f.params[name]) {
		panic(fmt.Sprintf("entry.cddl has no rule %s of %d arguments", name, len(args)))
	}
	p := &parser{file: f, tokens: slices.Clone(tokens), scope: scope{}}
	for i, a := range args {
		p.scope[f.params[name][i]] = a
	}
	m := p.choice()
	if len(p.tokens) > 0 {
		panic(fmt.Sprintf("entry.cddl, rule %s: %q is left over", name, p.tokens))
	}
	return m
}

func (p *parser) peek() string {
	if len(p.tokens) == 0 {
		return ""
	}
	return p.tokens[0]
}

func (p *parser) next() string {
	s := p.peek()
	p.tokens = p.tokens[min(1, len(p.tokens)):]
	return s
}

func (p *parser) take(s string) bool {
	if p.peek() != s {
		return false
	}
	p.next()
	return true
}

func (p *parser) must(s string) {
	if got := p.next(); got != s {
		panic(fmt.Sprintf("entry.cddl: %q where %q is due, before %q", got, s, p.tokens))
	}
}

func (p *parser) choice() matcher {
	all := []matcher{p.controlled()}
	for p.take("/") {
		all = append(all, p.controlled())
	}
	return func(v any) bool { return slices.ContainsFunc(all, func(m matcher) bool { return m(v) }) }
}

func (p *parser) controlled() matcher {
	m := p.one()
	switch p.peek() {
	case ".size":
		p.next()
		size := p.one()
		return func(v any) bool {
			switch x := v.(type) {
			case string:
				return m(v) && size(uint64(len(x)))
			case []byte:
				return m(v) && size(uint64(len(x)))
			case uint64: // .size of a uint is in bytes
				return m(v) && slices.ContainsFunc([]int{1, 2, 3, 4, 5, 6, 7, 8}, func(n int) bool { return size(uint64(n)) && (n == 8 || x>>(8*n) == 0) })
			}
			return false
		}
	case ".cbor":
		p.next()
		inner := p.one()
		return func(v any) bool {
			b, ok := v.([]byte)
			var x any
			return ok && m(v) && cbor.Unmarshal(b, &x) == nil && inner(x)
		}
	}
	return m
}

func number(s string) *big.Int {
	n, ok := new(big.Int).SetString(s, 10)
	if !ok {
		return nil
	}
	return n
}

func asNumber(v any) *big.Int {
	switch x := v.(type) {
	case uint64:
		return new(big.Int).SetUint64(x)
	case int64:
		return big.NewInt(x)
	}
	return nil
}

func (p *parser) one() matcher {
	s := p.next()
	if low := number(s); low != nil {
		high := low
		if p.take("..") {
			high = number(p.next())
		}
		return func(v any) bool { n := asNumber(v); return n != nil && n.Cmp(low) >= 0 && n.Cmp(high) <= 0 }
	}
	switch {
	case s == "(":
		m := p.choice()
		p.must(")")
		return m
	case s == "{":
		ms := p.members("}", true)
		return func(v any) bool { x, ok := v.(map[any]any); return ok && matchMap(ms, x) }
	case s == "[":
		ms := p.members("]", false)
		return func(v any) bool { x, ok := v.([]any); return ok && matchArray(ms, x) }
	case strings.HasPrefix(s, "#6."):
		tag := number(strings.TrimPrefix(s, "#6.")).Uint64()
		p.must("(")
		m := p.choice()
		p.must(")")
		return func(v any) bool { x, ok := v.(cbor.Tag); return ok && x.Number == tag && m(x.Content) }
	case strings.HasPrefix(s, `"`):
		return func(v any) bool { return v == strings.Trim(s, `"`) }
	case p.scope[s] != nil:
		return p.scope[s]
	}
	switch s {
	case "uint":
		return func(v any) bool { _, ok := v.(uint64); return ok }
	case "bstr":
		return func(v any) bool { _, ok := v.([]byte); return ok }
	case "tstr":
		return func(v any) bool { _, ok := v.(string); return ok }
	case "true":
		return func(v any) bool { return v == true }
	case "null":
		return func(v any) bool { return v == nil }
	}
	var args []matcher
	if p.take("<") {
		for {
			args = append(args, p.choice())
			if !p.take(",") {
				break
			}
		}
		p.must(">")
	}
	return p.file.rule(s, args)
}

// members reads the inside of a map or array up to its end.
func (p *parser) members(end string, keyed bool) []member {
	var ms []member
	for !p.take(end) {
		if len(p.tokens) == 0 {
			panic("entry.cddl: no " + end)
		}
		m := member{least: 1, most: 1}
		switch {
		case p.take("?"):
			m.least = 0
		case p.take("+"):
			m.most = 1 << 20
		case p.peek() == "*" || len(p.tokens) > 1 && p.tokens[1] == "*":
			m.least, m.most = 0, 1<<20
			if n := number(p.peek()); n != nil {
				m.least = int(n.Int64())
				p.next()
			}
			p.must("*")
			if n := number(p.peek()); n != nil {
				m.most = int(n.Int64())
				p.next()
			}
		}
		switch {
		case keyed && p.take("("):
			for {
				m.either = append(m.either, p.alternative())
				if p.take(")") {
					break
				}
				p.must("//")
			}
		default:
			if len(p.tokens) > 1 && p.tokens[1] == ":" {
				m.key = number(p.next()) // in an array a name for the reader
				p.next()
			}
			if keyed != (m.key != nil) {
				panic(fmt.Sprintf("entry.cddl: a map's member without a number, or an array's with one, before %q", p.tokens))
			}
			m.value = p.choice()
		}
		ms = append(ms, m)
		p.take(",")
	}
	return ms
}

// alternative reads members of a choice of groups, up to // or the bracket.
func (p *parser) alternative() []member {
	depth, n := 0, 0
	for ; n < len(p.tokens); n++ {
		s := p.tokens[n]
		if depth == 0 && (s == ")" || s == "//") {
			break
		}
		if s == "(" || s == "[" || s == "{" {
			depth++
		} else if s == ")" || s == "]" || s == "}" {
			depth--
		}
	}
	inside := &parser{file: p.file, tokens: append(slices.Clone(p.tokens[:n]), "end"), scope: p.scope}
	p.tokens = p.tokens[n:]
	return inside.members("end", true)
}

func matchMap(ms []member, v map[any]any) bool {
	left := maps.Clone(v)
	return takeMembers(ms, left) && len(left) == 0
}

// takeMembers takes out of the map what the members match, and says whether all that must be there was.
func takeMembers(ms []member, left map[any]any) bool {
	for _, m := range ms {
		if m.either != nil {
			if !slices.ContainsFunc(m.either, func(alt []member) bool {
				rest := maps.Clone(left)
				if !takeMembers(alt, rest) {
					return false
				}
				clear(left)
				maps.Copy(left, rest)
				return true
			}) {
				return false
			}
			continue
		}
		var key any = m.key.Uint64()
		x, there := left[key]
		if there && !m.value(x) || !there && m.least > 0 {
			return false
		}
		delete(left, key)
	}
	return true
}

func matchArray(ms []member, v []any) bool {
	for _, m := range ms {
		n := 0
		for n < m.most && n < len(v) && m.value(v[n]) {
			n++
		}
		if n < m.least {
			return false
		}
		v = v[n:]
	}
	return len(v) == 0
}
