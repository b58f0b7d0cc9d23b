package plot

import (
	"cmp"
	"math"
	"slices"
	"strings"
	"sync"
	"unicode"

	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	xfont "golang.org/x/image/font"
	"golang.org/x/image/font/opentype"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Sizes in units.
const (
	titleSize  = 21
	textSize   = 16
	smallSize  = 14
	edge       = 20 // around the figure
	gap        = 6  // between a label and what it names
	panelGap   = 18
	mostMargin = 230 // of the labels on the right
	arrowHead  = 18
	capHeight  = 0.72 // of the type's size
)

// pen draws on a canvas in a scheme.
type pen struct {
	draw.Canvas
	s     Scheme
	taken []vg.Rectangle // where notes should not go
	words []vg.Rectangle // where they must not: other notes
}

// clean replaces what no figure can show: control characters, which no XML takes either, and broken UTF-8.
func clean(words string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) || r == '\ufffe' || r == '\uffff' {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(words, "?"))
}

// faces holds the two faces in use; the library's own collection of twelve would add 4 MB to the program.
var faces = sync.OnceValue(func() *font.Cache {
	var all font.Collection
	for _, f := range []struct {
		ttf    []byte
		weight xfont.Weight
	}{{liberationsansregular.TTF, xfont.WeightNormal}, {liberationsansbold.TTF, xfont.WeightBold}} {
		face, err := opentype.Parse(f.ttf)
		if err != nil {
			panic("plot: the font in the program is damaged: " + err.Error()) // it is compiled in
		}
		all = append(all, font.Face{Font: font.Font{Typeface: "Liberation", Variant: "Sans", Weight: f.weight}, Face: face})
	}
	return font.NewCache(all)
})

func style(size vg.Length, bold bool) draw.TextStyle {
	f := font.Font{Typeface: "Liberation", Variant: "Sans", Size: size}
	if bold {
		f.Weight = xfont.WeightBold
	}
	return draw.TextStyle{Font: f, Handler: text.Plain{Fonts: faces()}}
}

// write draws one line of text with its middle at a height and its left end (-0), centre (-0.5) or right end (-1) at x.
func (p *pen) write(sty draw.TextStyle, r role, x, y vg.Length, align draw.XAlignment, words string) {
	sty.Color, sty.XAlign, sty.YAlign = p.s.of(r), align, draw.YTop
	box := sty.Height(words)
	baseline := y - capHeight/2*sty.Font.Size
	// The library puts the baseline of a line at Y + YAlign x its height - ascent + size.
	top := baseline - box*vg.Length(draw.YTop) + sty.FontExtents().Ascent - sty.Font.Size
	p.FillText(sty, vg.Point{X: x, Y: top}, clean(words))
}

func (p *pen) line(r role, width vg.Length, dash []vg.Length, pts ...vg.Point) {
	p.StrokeLines(draw.LineStyle{Color: p.s.of(r), Width: width, Dashes: dash}, pts)
}

// wrap breaks words into lines no wider than most, of about equal width.
func wrap(sty draw.TextStyle, words string, most vg.Length) []string {
	lines := breakLines(sty, words, most)
	n := len(lines)
	for range 40 { // to an eighth of the width; words that fill a line each never make one more
		narrower := breakLines(sty, words, most*0.95)
		if n < 2 || len(narrower) > n {
			break
		}
		lines, most = narrower, most*0.95
	}
	return lines
}

func breakLines(sty draw.TextStyle, words string, most vg.Length) []string {
	var lines []string
	for _, w := range strings.FieldsFunc(clean(words), func(r rune) bool { return r == ' ' }) { // a no-break space holds
		if n := len(lines); n > 0 && sty.Width(lines[n-1]+" "+w) <= most {
			lines[n-1] += " " + w
		} else {
			lines = append(lines, w)
		}
	}
	return lines
}

// draw lays the figure out on the canvas.
func (f figure) draw(c draw.Canvas, s Scheme) {
	p := &pen{Canvas: c, s: s}
	p.FillPolygon(s.of(paper), []vg.Point{{X: 0, Y: 0}, {X: Width, Y: 0}, {X: Width, Y: Height}, {X: 0, Y: Height}})

	top := vg.Length(Height - edge)
	for _, l := range wrap(style(titleSize, true), f.title, Width-2*edge) {
		p.write(style(titleSize, true), ink, edge, top-titleSize*0.55, draw.XLeft, l)
		top -= titleSize * 1.3
	}
	bottom := vg.Length(edge)
	lines := wrap(style(smallSize, false), f.foot, Width-2*edge)
	for i, l := range lines {
		p.write(style(smallSize, false), quiet, edge, bottom+smallSize*(0.5+1.3*vg.Length(len(lines)-1-i)), draw.XLeft, l)
	}
	bottom += smallSize * 1.3 * vg.Length(len(lines))
	if len(lines) > 0 {
		bottom += 6
	}

	left, right := vg.Length(0), vg.Length(30)
	weight := 0.0
	for _, q := range f.panels {
		for _, t := range q.y.ticks {
			left = max(left, style(textSize, false).Width(t.label))
		}
		for _, s := range q.strokes {
			for _, l := range wrap(style(smallSize, false), s.label, mostMargin) {
				right = max(right, style(smallSize, false).Width(l)+2*gap)
			}
		}
		weight += q.weight
	}
	left += edge + 10
	right = Width - edge - min(right, mostMargin+2*gap)

	p.write(style(textSize, false), ink, (left+right)/2, bottom+textSize*0.5, draw.XCenter, f.x.title)
	bottom += textSize * 1.5
	tickRow := bottom + textSize*0.5
	bottom += textSize*1.2 + 8

	free := top - bottom - vg.Length(len(f.panels))*(textSize*2) - vg.Length(len(f.panels)-1)*panelGap
	for i, q := range f.panels {
		top -= textSize * 2
		p.write(style(textSize, false), ink, edge, top+textSize*1.2, draw.XLeft, q.y.title)
		h := free * vg.Length(q.weight/weight)
		area := vg.Rectangle{Min: vg.Point{X: left, Y: top - h}, Max: vg.Point{X: right, Y: top}}
		p.panel(q, f.x, area)
		if i == len(f.panels)-1 {
			free := vg.Length(-1e9) // right end of the last label: a label that would touch it is left out, its tick stays
			for _, t := range f.x.ticks {
				x := area.Min.X + (area.Max.X-area.Min.X)*vg.Length((t.at-f.x.min)/(f.x.max-f.x.min))
				half := style(textSize, false).Width(t.label) / 2
				p.line(ink, 1, nil, vg.Point{X: x, Y: area.Min.Y}, vg.Point{X: x, Y: area.Min.Y - 6})
				if x-half > free && x-half > 0 && x+half < Width {
					p.write(style(textSize, false), ink, x, tickRow, draw.XCenter, t.label)
					free = x + half + 8
				}
			}
		}
		top -= h + panelGap
	}
}

// panel draws one data area.
func (p *pen) panel(q panel, x axis, area vg.Rectangle) {
	in := draw.Canvas{Canvas: p.Canvas.Canvas, Rectangle: area}
	at := func(d pt) vg.Point {
		return vg.Point{X: in.X((d.x - x.min) / (x.max - x.min)), Y: in.Y((d.y - q.y.min) / (q.y.max - q.y.min))}
	}
	all := func(ds []pt) []vg.Point {
		out := make([]vg.Point, 0, len(ds))
		for _, d := range ds {
			out = append(out, at(d))
		}
		return out
	}
	p.taken, p.words = nil, nil
	for _, s := range q.spans {
		back := slices.Clone(s.low)
		slices.Reverse(back)
		if poly := in.ClipPolygonXY(all(append(slices.Clone(s.high), back...))); len(poly) > 2 {
			p.FillPolygon(p.s.of(s.role), poly)
		}
	}
	for _, t := range q.y.ticks {
		y := at(pt{x.min, t.at}).Y
		p.line(rule, 0.8, nil, vg.Point{X: area.Min.X, Y: y}, vg.Point{X: area.Max.X, Y: y})
		p.write(style(textSize, false), ink, area.Min.X-8, y, draw.XRight, t.label)
	}
	for _, t := range x.ticks {
		v := at(pt{t.at, q.y.min}).X
		p.line(rule, 0.8, nil, vg.Point{X: v, Y: area.Min.Y}, vg.Point{X: v, Y: area.Max.Y})
	}
	p.line(ink, 1.2, nil, area.Min, vg.Point{X: area.Max.X, Y: area.Min.Y})

	var ends []end
	var inside []end
	for _, s := range q.strokes {
		var lastPoint vg.Point
		for _, l := range in.ClipLinesXY(all(s.pts)) {
			if n := len(l) - 1; s.arrow { // the line ends inside its head, which is wider
				tip, back := l[n], l[n-1]
				d := math.Hypot(float64(tip.X-back.X), float64(tip.Y-back.Y))
				k := vg.Length(min(1, arrowHead*0.8/max(d, 1e-9)))
				l[n] = vg.Point{X: tip.X + (back.X-tip.X)*k, Y: tip.Y + (back.Y-tip.Y)*k}
				p.arrow(s.role, back, tip)
			}
			p.line(s.role, s.width, s.dash, l...)
			lastPoint = l[len(l)-1]
			for i := 1; i < len(l); i++ { // notes keep off lines
				p.keepOff(l[i-1], l[i])
			}
		}
		if s.label == "" {
			continue
		}
		if lastPoint == (vg.Point{}) {
			lastPoint = at(s.pts[len(s.pts)-1])
		}
		e := end{lastPoint, s.role, s.label}
		if lastPoint.X > area.Max.X-2 {
			ends = append(ends, e)
		} else {
			inside = append(inside, e)
		}
	}
	for _, s := range q.spots {
		if s.shape != none {
			p.taken = append(p.taken, around(at(s.pt), 8))
		}
		if s.u > 0 {
			a, b := at(pt{s.x, s.y - s.u}), at(pt{s.x, s.y + s.u})
			a.Y, b.Y = max(a.Y, area.Min.Y), min(b.Y, area.Max.Y)
			p.keepOff(a, b) // inside the area: a whisker can be longer than the page a thousand times
			p.line(s.role, 1.4, nil, a, b)
			p.line(s.role, 1.4, nil, vg.Point{X: a.X - 4, Y: a.Y}, vg.Point{X: a.X + 4, Y: a.Y})
			p.line(s.role, 1.4, nil, vg.Point{X: b.X - 4, Y: b.Y}, vg.Point{X: b.X + 4, Y: b.Y})
		}
	}
	for _, s := range q.spots {
		p.spot(s.shape, s.role, at(s.pt))
	}
	p.margin(ends, area)
	for _, e := range inside {
		p.note(e.words, e.at, area)
	}
	for _, s := range q.spots {
		if s.note != "" {
			p.note(s.note, at(s.pt), area)
		}
	}
}

func around(c vg.Point, r vg.Length) vg.Rectangle {
	return vg.Rectangle{Min: vg.Point{X: c.X - r, Y: c.Y - r}, Max: vg.Point{X: c.X + r, Y: c.Y + r}}
}

// keepOff marks the way from a to b as taken.
func (p *pen) keepOff(a, b vg.Point) {
	n := int(math.Hypot(float64(b.X-a.X), float64(b.Y-a.Y))/10) + 1
	for i := range n + 1 {
		k := vg.Length(i) / vg.Length(n)
		p.taken = append(p.taken, around(vg.Point{X: a.X + (b.X-a.X)*k, Y: a.Y + (b.Y-a.Y)*k}, 3))
	}
}

// spot draws a mark; hollow ones are filled with paper, so that a line does not run through them.
func (p *pen) spot(s shape, r role, c vg.Point) {
	poly := func(corners int, turn, radius float64) []vg.Point {
		var out []vg.Point
		for i := range corners {
			sin, cos := math.Sincos(turn + 2*math.Pi*float64(i)/float64(corners))
			out = append(out, vg.Point{X: c.X + vg.Length(radius*cos), Y: c.Y + vg.Length(radius*sin)})
		}
		return out
	}
	hollow := func(pts []vg.Point) {
		p.FillPolygon(p.s.of(paper), pts)
		p.line(r, 2, nil, append(pts, pts[0], pts[1])...)
	}
	switch s {
	case diamond:
		hollow(poly(4, 0, 9))
		p.line(r, 1.6, nil, vg.Point{X: c.X - 3, Y: c.Y}, vg.Point{X: c.X + 3, Y: c.Y})
	case square:
		hollow(poly(4, math.Pi/4, 9))
	case none:
	case wedge:
		p.FillPolygon(p.s.of(r), poly(3, math.Pi/2, 8))
	default:
		p.FillPolygon(p.s.of(r), poly(16, 0, 5))
	}
}

func (p *pen) arrow(r role, from, to vg.Point) {
	a := math.Atan2(float64(to.Y-from.Y), float64(to.X-from.X))
	tip := []vg.Point{to}
	for _, d := range []float64{math.Pi - 0.5, math.Pi + 0.5} {
		sin, cos := math.Sincos(a + d)
		tip = append(tip, vg.Point{X: to.X + vg.Length(arrowHead*cos), Y: to.Y + vg.Length(arrowHead*sin)})
	}
	p.FillPolygon(p.s.of(r), tip)
}

// end is a label at the end of a line.
type end struct {
	at    vg.Point
	role  role
	words string
}

// margin writes the labels of lines that end at the right edge, moved apart where they would touch, with a leader when moved.
func (p *pen) margin(ends []end, area vg.Rectangle) {
	slices.SortStableFunc(ends, func(a, b end) int { return cmp.Compare(b.at.Y, a.at.Y) })
	sty := style(smallSize, false)
	const pitch = smallSize * 1.2
	type block struct {
		lines []string
		y, h  vg.Length // middle and height
	}
	var bs []block
	for _, e := range ends {
		l := wrap(sty, e.words, mostMargin)
		bs = append(bs, block{l, e.at.Y, pitch * vg.Length(len(l))})
	}
	for range 60 { // push neighbours apart by halves until none touch, inside the page
		moved := false
		for i := 1; i < len(bs); i++ {
			if d := bs[i].y + bs[i].h/2 + bs[i-1].h/2 - bs[i-1].y; d > 0.05 {
				bs[i-1].y += d / 2
				bs[i].y -= d / 2
				moved = true
			}
		}
		if n := len(bs); n > 0 {
			bs[0].y = min(bs[0].y, area.Max.Y+pitch/2-bs[0].h/2)
			bs[n-1].y = max(bs[n-1].y, area.Min.Y+bs[n-1].h/2-pitch/2)
		}
		if !moved {
			break
		}
	}
	for i, b := range bs {
		e := ends[i]
		if math.Abs(float64(b.y-e.at.Y)) > 3 {
			p.line(e.role, 0.8, nil, e.at, vg.Point{X: e.at.X + gap + 2, Y: b.y})
		}
		for k, l := range b.lines {
			p.write(sty, ink, e.at.X+2*gap, b.y+b.h/2-pitch*(vg.Length(k)+0.5), draw.XLeft, l)
		}
	}
}

func meet(a, b vg.Rectangle) bool {
	return a.Min.X < b.Max.X && b.Min.X < a.Max.X && a.Min.Y < b.Max.Y && b.Min.Y < a.Max.Y
}

// note writes words beside a point, at the first of the places around it that is free, wrapped when they are long. When none is
// free it takes the least crowded.
func (p *pen) note(words string, at vg.Point, area vg.Rectangle) {
	sty := style(smallSize, false)
	const pitch = smallSize * 1.2
	var best vg.Rectangle
	var lines []string
	least := math.Inf(1)
	for _, most := range []vg.Length{300, 190, 130} {
		ls := wrap(sty, words, most)
		var w vg.Length
		for _, l := range ls {
			w = max(w, sty.Width(l))
		}
		h := pitch * vg.Length(len(ls))
		for ring, d := range []vg.Length{12, 26, 44, 66, 90, 120} {
			for k, dir := range []vg.Point{{X: 0, Y: 1}, {X: 1, Y: 0}, {X: 0, Y: -1}, {X: -1, Y: 0}, {X: 1, Y: 1}, {X: 1, Y: -1}, {X: -1, Y: 1}, {X: -1, Y: -1},
				{X: 0.5, Y: 1}, {X: -0.5, Y: 1}, {X: 0.5, Y: -1}, {X: -0.5, Y: -1}} {
				c := vg.Point{X: at.X + dir.X*(d+w/2), Y: at.Y + dir.Y*(d+h/2)}
				r := vg.Rectangle{Min: vg.Point{X: c.X - w/2, Y: c.Y - h/2}, Max: vg.Point{X: c.X + w/2, Y: c.Y + h/2}}
				if r.Min.X < area.Min.X+2 || r.Max.X > area.Max.X-2 || r.Min.Y < area.Min.Y+2 || r.Max.Y > area.Max.Y-2 {
					continue
				}
				cost := float64(ring)*0.7 + float64(k)*0.05 + float64(len(ls))*0.2
				for _, t := range p.taken {
					if meet(r, t) {
						cost += 3
					}
				}
				for _, t := range p.words {
					if meet(r, t) {
						cost += 1000
					}
				}
				if cost < least {
					least, best, lines = cost, r, ls
				}
			}
		}
	}
	if len(lines) == 0 { // larger than the panel: at its foot
		lines = wrap(sty, words, area.Max.X-area.Min.X)
		best = vg.Rectangle{Min: area.Min, Max: vg.Point{X: area.Max.X, Y: area.Min.Y + pitch*vg.Length(len(lines))}}
	}
	// A leader where the words stand off, from the nearest point of their box.
	near := vg.Point{X: min(max(at.X, best.Min.X), best.Max.X), Y: min(max(at.Y, best.Min.Y), best.Max.Y)}
	if d := math.Hypot(float64(near.X-at.X), float64(near.Y-at.Y)); d > 20 {
		along := func(far float64) vg.Point {
			k := vg.Length(far / d)
			return vg.Point{X: at.X + (near.X-at.X)*k, Y: at.Y + (near.Y-at.Y)*k}
		}
		p.line(quiet, 0.8, nil, along(10), along(d-3))
	}
	p.words = append(p.words, best)
	for i, l := range lines {
		p.write(sty, ink, best.Min.X, best.Max.Y-pitch*(vg.Length(i)+0.5), draw.XLeft, l)
	}
}
