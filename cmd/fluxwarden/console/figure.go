package console

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"
	"strings"
)

// A figure is one panel drawn as SVG: a scale along x and one along y, lines, bands and points on it. It carries no colours: classes name what a
// mark is, and the style sheet says how it looks by day, by night and on paper.
type figure struct {
	b                        strings.Builder
	title, yLabel            string
	x0, x1, y0, y1           float64 // data at the edges
	width, height            float64
	left, right, top, bottom float64 // margins
}

func newFigure(title, yLabel string, height, x0, x1, y0, y1 float64) *figure {
	if !(y1 > y0) {
		y0, y1 = 0, 1
	}
	return &figure{title: title, yLabel: yLabel, x0: x0, x1: x1, y0: y0, y1: y1, width: 1000, height: height, left: 96, right: 20, top: 12, bottom: 24}
}

func (f *figure) x(v float64) float64 {
	return f.left + (v-f.x0)/(f.x1-f.x0)*(f.width-f.left-f.right)
}

func (f *figure) y(v float64) float64 {
	return f.height - f.bottom - (v-f.y0)/(f.y1-f.y0)*(f.height-f.top-f.bottom)
}

// short writes a coordinate with one decimal and no more letters than it needs.
func short(v float64) string {
	s := strconv.FormatFloat(math.Round(v*10)/10, 'f', -1, 64)
	return s
}

// line draws values over xs and breaks where a value is not there.
func (f *figure) line(class string, xs, ys []float64) {
	if p := f.path(xs, ys); p != "" {
		fmt.Fprintf(&f.b, `<path class="%s" d="%s"/>`, class, p)
	}
}

func (f *figure) path(xs, ys []float64) string {
	var p strings.Builder
	up := true
	lastX := math.Inf(-1)
	for i, v := range ys {
		if v != v {
			up = true
			continue
		}
		px, py := f.x(xs[i]), f.y(f.within(v))
		switch {
		case up:
			p.WriteString("M" + short(px) + " " + short(py))
			if i+1 == len(ys) || ys[i+1] != ys[i+1] { // a lone minute is seen as a dot
				p.WriteString("h.6")
			}
		case px-lastX < 0.05:
			continue
		default:
			p.WriteString("L" + short(px) + " " + short(py))
		}
		up, lastX = false, px
	}
	return p.String()
}

// within keeps a value near the panel, so that one wild minute draws a line to the edge and not to the moon.
func (f *figure) within(v float64) float64 {
	reach := (f.y1 - f.y0) / 20
	return min(max(v, f.y0-reach), f.y1+reach)
}

// band fills between two lines of the same xs.
func (f *figure) band(class string, xs, low, high []float64) {
	for i := 0; i < len(xs); {
		if low[i] != low[i] || high[i] != high[i] {
			i++
			continue
		}
		n := i
		for n < len(xs) && low[n] == low[n] && high[n] == high[n] {
			n++
		}
		var p strings.Builder
		for k := i; k < n; k++ {
			p.WriteString(pick(k == i, "M", "L") + short(f.x(xs[k])) + " " + short(f.y(f.within(high[k]))))
		}
		for k := n - 1; k >= i; k-- {
			p.WriteString("L" + short(f.x(xs[k])) + " " + short(f.y(f.within(low[k]))))
		}
		fmt.Fprintf(&f.b, `<path class="%s" d="%sZ"/>`, class, p.String())
		i = n
	}
}

// strokes draws an upright stroke from low to high at each x.
func (f *figure) strokes(class string, xs, low, high []float64) {
	var p strings.Builder
	for i := range xs {
		p.WriteString("M" + short(f.x(xs[i])) + " " + short(f.y(f.within(low[i]))) + "V" + short(f.y(f.within(high[i]))))
	}
	if p.Len() > 0 {
		fmt.Fprintf(&f.b, `<path class="%s" d="%s"/>`, class, p.String())
	}
}

// points draws a mark for each value.
func (f *figure) points(class string, xs, ys []float64) {
	var p strings.Builder
	for i, v := range ys {
		if v == v && v >= f.y0 && v <= f.y1 {
			p.WriteString("M" + short(f.x(xs[i])) + " " + short(f.y(v)) + "h.01")
		}
	}
	if p.Len() > 0 {
		fmt.Fprintf(&f.b, `<path class="%s" d="%s"/>`, class, p.String())
	}
}

// stretch shades all of the panel from one x to another.
func (f *figure) stretch(class, label string, from, to float64) {
	a, b := f.x(max(from, f.x0)), f.x(min(to, f.x1))
	if b <= a {
		return
	}
	fmt.Fprintf(&f.b, `<g class="%s"><rect x="%s" y="%s" width="%s" height="%s"><title>%s</title></rect></g>`, class, short(a), short(f.top), short(max(b-a, 1)),
		short(f.height-f.top-f.bottom), html.EscapeString(label))
}

// mark draws an upright line with a word at its head.
func (f *figure) mark(class, label string, at float64) {
	if at < f.x0 || at > f.x1 {
		return
	}
	x := short(f.x(at))
	fmt.Fprintf(&f.b, `<g class="%s"><path d="M%s %sV%s"/><text x="%s" y="%s">%s</text></g>`, class, x, short(f.top), short(f.height-f.bottom), x, short(f.top+9),
		html.EscapeString(label))
}

// A tick is a place on an axis and its label.
type tick struct {
	at    float64
	label string
}

// ticks gives round numbers that divide the range into about n parts.
func ticks(low, high float64, n int) []tick {
	if !(high > low) {
		return nil
	}
	step := math.Pow(10, math.Floor(math.Log10((high-low)/float64(n))))
	for _, m := range []float64{1, 2, 5, 10} {
		if (high-low)/(step*m) <= float64(n) {
			step *= m
			break
		}
	}
	decimals := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	var list []tick
	for k := math.Ceil(low/step - 1e-9); k*step <= high+step*1e-9; k++ {
		list = append(list, tick{k * step, strings.Replace(strconv.FormatFloat(k*step+0, 'f', decimals, 64), "-", "−", 1)})
	}
	return list
}

// svg gives the finished panel. Below is a second row of labels under the x axis, with its name; it may be empty.
func (f *figure) svg(xTicks, below []tick, xLabel, belowLabel string) template.HTML {
	var o strings.Builder
	height := f.height
	if len(below) > 0 {
		height += 15
	}
	fmt.Fprintf(&o, `<svg viewBox="0 0 %s %s" role="img" aria-label="%s" data-left="%s" data-right="%s" data-x0="%s" data-x1="%s">`, short(f.width), short(height),
		html.EscapeString(f.title), short(f.left), short(f.width-f.right), number(f.x0), number(f.x1))
	for _, t := range ticks(f.y0, f.y1, 6) {
		y := short(f.y(t.at))
		fmt.Fprintf(&o, `<path class="grid" d="M%s %sH%s"/><text class="ty" x="%s" y="%s">%s</text>`, short(f.left), y, short(f.width-f.right), short(f.left-5),
			short(f.y(t.at)+3.5), t.label)
	}
	base := f.height - f.bottom
	for _, t := range xTicks {
		if t.at >= f.x0 && t.at <= f.x1 {
			fmt.Fprintf(&o, `<path class="grid" d="M%s %sV%s"/><text class="tx" x="%s" y="%s">%s</text>`, short(f.x(t.at)), short(f.top), short(base+4), short(f.x(t.at)),
				short(base+15), html.EscapeString(t.label))
		}
	}
	for _, t := range below {
		if t.at >= f.x0 && t.at <= f.x1 {
			fmt.Fprintf(&o, `<text class="tx second" x="%s" y="%s">%s</text>`, short(f.x(t.at)), short(base+29), html.EscapeString(t.label))
		}
	}
	fmt.Fprintf(&o, `<text class="name" x="%s" y="%s">%s</text>`, "4", short(f.top+2), html.EscapeString(f.yLabel))
	if xLabel != "" {
		fmt.Fprintf(&o, `<text class="tx" x="4" y="%s" text-anchor="start">%s</text>`, short(base+15), html.EscapeString(xLabel))
	}
	if len(below) > 0 {
		fmt.Fprintf(&o, `<text class="tx second" x="4" y="%s" text-anchor="start">%s</text>`, short(base+29), html.EscapeString(belowLabel))
	}
	fmt.Fprintf(&o, `<rect class="frame" x="%s" y="%s" width="%s" height="%s"/>`, short(f.left), short(f.top), short(f.width-f.left-f.right), short(base-f.top))
	o.WriteString(f.b.String())
	o.WriteString(`</svg>`)
	return template.HTML(o.String()) // built here: every text in it is escaped above
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', 8, 64) }

func pick(first bool, a, b string) string {
	if first {
		return a
	}
	return b
}

// spread is the range of values, with nothing taken of what is not there.
func spread(low, high float64, columns ...[]float64) (float64, float64) {
	for _, c := range columns {
		for _, v := range c {
			if v == v {
				low, high = min(low, v), max(high, v)
			}
		}
	}
	return low, high
}
