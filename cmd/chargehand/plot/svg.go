package plot

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"html"
	"regexp"
	"strconv"
	"strings"

	"gonum.org/v1/plot/vg"
)

var (
	header = regexp.MustCompile(`(?s)^.*?<svg [^>]*>\n?`)
	// type of a line: size, weight and words, as the library writes them
	typed  = regexp.MustCompile(`(?s)(<text [^>]*?)(style="[^"]*?font-weight:(\w+)[^"]*?font-size:([0-9.]+)px[^"]*")>([^<]*)</text>`)
	styled = regexp.MustCompile(`\s*style="([^"]*)"`)
)

// plainSVG turns the library's output into what a page can take: no prologue, no size but the view box, so that it scales, a
// name for readers of the screen, and attributes with classes in place of style attributes. Text is escaped by the library, so
// that a style attribute in it is none.
func plainSVG(raw []byte, f figure, s Scheme) []byte {
	var head bytes.Buffer
	fmt.Fprintf(&head, `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %d %d" role="img" class="figure" font-family="'Liberation Sans', Arial, Helvetica, sans-serif">`+"\n<title>", Width, Height)
	xml.EscapeText(&head, []byte(clean(f.title))) // a bytes.Buffer takes everything
	head.WriteString("</title>\n")
	raw = header.ReplaceAllLiteral(raw, nil)
	// Each line is told its width: a page without the font then fits another into it, and nothing is cut or overlaps.
	raw = typed.ReplaceAllFunc(raw, func(m []byte) []byte {
		g := typed.FindSubmatch(m)
		size, err := strconv.ParseFloat(string(g[4]), 64)
		if err != nil {
			return m
		}
		w := style(vg.Length(size), string(g[3]) == "bold").Width(html.UnescapeString(string(g[5])))
		return fmt.Appendf(nil, `%s textLength="%.1f" lengthAdjust="spacingAndGlyphs" %s>%s</text>`, bytes.TrimRight(g[1], " \n\t"), w.Points(), g[2], g[5])
	})
	body := styled.ReplaceAllFunc(raw, func(m []byte) []byte {
		var attributes strings.Builder
		var classes []string
		for _, d := range strings.Split(string(styled.FindSubmatch(m)[1]), ";") {
			name, value, _ := strings.Cut(d, ":")
			if name == "font-family" || name == "font-variant" || value == "normal" {
				continue
			}
			fmt.Fprintf(&attributes, ` %s="%s"`, name, value)
			for r := range roles {
				if strings.EqualFold(value, fmt.Sprintf("#%06x", s.hex(r))) {
					classes = append(classes, name+"-"+roleNames[r])
				}
			}
		}
		if len(classes) > 0 {
			fmt.Fprintf(&attributes, ` class="%s"`, strings.Join(classes, " "))
		}
		return []byte(attributes.String())
	})
	return append(head.Bytes(), body...)
}
