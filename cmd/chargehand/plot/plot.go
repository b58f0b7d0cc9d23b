// Package plot draws the figures of the desk and of the printed card: trend, capacity, fill and bleed-down trace, as SVG, PNG or
// PDF from one description. It knows no records and no physics: it takes plain numbers in the unit that is shown, and words.
//
// Everything is told by shape, line style and a label at the thing itself; colour only helps. Type is 14 units or more on a
// page 900 wide, so that it is read at arm's length. The title is the conclusion, and the caller's to word.
//
// In SVG each colour is also a class, such as "fill-ink" or "stroke-mark", so that a page's style sheet can recolour a figure
// for the night; there are no style attributes, which a strict content security policy would drop.
package plot

import (
	"bytes"
	"errors"
	"fmt"
	"image/color"
	"io"
	"math"
	"os"
	"strings"
	"unicode/utf8"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/unicode/norm"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Format is a file format.
type Format string

// Formats.
const (
	SVG Format = "svg"
	PNG Format = "png" // two pixels to a unit
	PDF Format = "pdf"
)

// ParseFormat reads a format's name, or a file name that ends in it.
func ParseFormat(s string) (Format, error) {
	name := strings.ToLower(s[strings.LastIndexByte(s, '.')+1:])
	switch f := Format(name); f {
	case SVG, PNG, PDF:
		return f, nil
	}
	return "", fmt.Errorf("%q is no format for a figure; use svg, png or pdf", s)
}

// Scheme is a set of colours.
type Scheme int

// Schemes.
const (
	Light Scheme = iota // for sunlight and print
	Dark
)

// Width and Height of every figure, in units: points of a PDF, user units of an SVG.
const (
	Width  = 900
	Height = 560
)

// ErrNothing is returned for a figure with nothing to draw.
var ErrNothing = errors.New("there is nothing to draw: the figure has no readings")

// A Picture is one of Trend, Capacity, Fill and Trace.
type Picture interface {
	figure() (figure, error)
}

// Write draws a picture. The errors are ErrNothing, a value that is no number, and those of w.
func Write(w io.Writer, p Picture, as Format, s Scheme) error {
	f, err := p.figure()
	if err != nil {
		return err
	}
	if err := f.check(); err != nil {
		return err
	}
	switch as {
	case SVG:
		c := vgsvg.New(Width, Height)
		f.draw(draw.New(c), s)
		var raw bytes.Buffer
		if _, err := c.WriteTo(&raw); err != nil {
			return err
		}
		_, err = w.Write(plainSVG(raw.Bytes(), f, s))
		return err
	case PNG:
		c := vgimg.NewWith(vgimg.UseWH(Width, Height), vgimg.UseDPI(2*72), vgimg.UseBackgroundColor(s.of(paper)))
		f.draw(draw.New(c), s)
		_, err := vgimg.PngCanvas{Canvas: c}.WriteTo(w)
		return err
	case PDF:
		return writePDF(w, f, s)
	}
	return fmt.Errorf("%q is no format for a figure; use svg, png or pdf", string(as))
}

// page is a PDF with two limits of vgpdf mended: it sends UTF-8 where its fonts are of Windows-1252, and it confuses the files
// of two faces, so that everything is written in the regular one.
type page struct{ *vgpdf.Canvas }

func (p page) FillString(f font.Face, at vg.Point, words string) {
	sty := style(f.Font.Size, false)
	p.Canvas.FillString(sty.Handler.Cache().Lookup(sty.Font, f.Font.Size), at, windows1252(words))
}

// windows1252 encodes words; a letter that it lacks loses its accent, and what it lacks even so becomes a question mark.
func windows1252(words string) string {
	var out []byte
	for _, r := range words {
		b, ok := charmap.Windows1252.EncodeRune(r)
		if !ok {
			base, _ := utf8.DecodeRuneInString(norm.NFD.String(string(r)))
			b, ok = charmap.Windows1252.EncodeRune(base)
		}
		if !ok {
			b = '?'
		}
		out = append(out, b)
	}
	return string(out)
}

// writePDF turns the panics of vgpdf, which prepares its fonts in a temporary folder, into errors.
func writePDF(w io.Writer, f figure, s Scheme) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("the PDF could not be made: %v; see that the temporary folder %s can be written, or take svg or png", r, os.TempDir())
		}
	}()
	c := page{vgpdf.New(Width, Height)}
	f.draw(draw.New(c), s)
	_, err = c.WriteTo(w)
	return err
}

// role is what a colour is for.
type role int

const (
	paper  role = iota
	ink         // text and axes
	quiet       // what stands back: ticks, footnotes
	rule        // grid
	zone        // between the limits
	spread      // an interval
	mark        // what was measured, and lines through it
	warn        // what does not fit, limits and demands
	roles
)

var roleNames = [roles]string{"paper", "ink", "quiet", "rule", "zone", "spread", "mark", "warn"}

// The palettes differ in lightness as well as in hue, so that they survive a grey print.
var palettes = [...][roles]uint32{
	Light: {0xffffff, 0x16202a, 0x4a5660, 0xd8dde1, 0xeaf2ea, 0xbfd0e4, 0x0b3d8c, 0x9c2400},
	Dark:  {0x10161c, 0xf1f4f6, 0xb6c0c9, 0x2d3943, 0x1a2e25, 0x2f4a6d, 0x8fbaff, 0xffa37a},
}

func (s Scheme) hex(r role) uint32 {
	if s != Dark {
		s = Light
	}
	return palettes[s][r]
}

func (s Scheme) of(r role) color.Color {
	v := s.hex(r)
	return color.NRGBA{R: uint8(v >> 16), G: uint8(v >> 8), B: uint8(v), A: 255}
}

// pt is a point in data.
type pt struct{ x, y float64 }

// shape of a mark.
type shape int

const (
	dot     shape = iota // a reading
	diamond              // one that does not fit: hollow
	wedge                // as left after a charge: filled triangle
	square               // a point picked out: hollow
	none                 // a place for a note
)

// span is a closed area between two lines over the same x.
type span struct {
	low, high []pt
	role      role
}

// stroke is a line with its label at its end: in the right margin where it reaches it, else beside the end.
type stroke struct {
	pts   []pt
	role  role
	width vg.Length
	dash  []vg.Length
	label string
	arrow bool // at the end
}

// spot is a mark with whiskers of +/-u and a note beside it.
type spot struct {
	pt
	u     float64
	shape shape
	role  role
	note  string
}

// panel is one data area; all panels of a figure share the x axis.
type panel struct {
	y       axis
	weight  float64 // of its height
	spans   []span
	strokes []stroke
	spots   []spot
}

// axis is a range with its ticks.
type axis struct {
	title    string
	min, max float64
	ticks    []tick
}

type tick struct {
	at    float64
	label string
}

// figure is a picture ready to be drawn.
type figure struct {
	title  string
	foot   string
	x      axis
	panels []panel
}

// check refuses what cannot be placed.
func (f figure) check() error {
	finite := func(ps []pt) error {
		for _, p := range ps {
			if v := p.x + p.y; math.IsNaN(v) || math.IsInf(v, 0) || math.Abs(p.x) > 1e15 || math.Abs(p.y) > 1e15 {
				return fmt.Errorf("the figure %q has a value that is no number: (%v, %v)", f.title, p.x, p.y)
			}
		}
		return nil
	}
	for _, p := range f.panels {
		for _, s := range p.spans {
			if err := errors.Join(finite(s.low), finite(s.high)); err != nil {
				return err
			}
		}
		for _, s := range p.strokes {
			if err := finite(s.pts); err != nil {
				return err
			}
		}
		for _, s := range p.spots {
			if err := finite([]pt{s.pt, {0, s.u}}); err != nil {
				return err
			}
		}
	}
	return nil
}

// fit sets the ranges of the y axes, and of x where it has none, around all that is drawn, with round ticks on y.
func (f *figure) fit() {
	wide, weight := newRange(), 0.0
	for _, p := range f.panels {
		weight += p.weight
	}
	for i := range f.panels {
		p := &f.panels[i]
		high := newRange()
		take := func(ps ...pt) {
			for _, q := range ps {
				wide.add(q.x)
				high.add(q.y)
			}
		}
		for _, s := range p.spans {
			take(s.low...)
			take(s.high...)
		}
		for _, s := range p.strokes {
			take(s.pts...)
		}
		for _, s := range p.spots {
			take(pt{s.x, s.y - s.u}, pt{s.x, s.y + s.u})
		}
		p.y.min, p.y.max = high.padded(0.06)
		p.y.ticks = roundTicks(p.y.min, p.y.max, max(3, int(math.Round(6*p.weight/weight))))
	}
	if f.x.min == f.x.max {
		f.x.min, f.x.max = wide.padded(0)
	}
}
