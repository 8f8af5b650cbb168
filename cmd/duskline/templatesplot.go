package main

import (
	"cmp"
	"fmt"
	"image/color"
	"math"
	"slices"

	"duskline/pipeline"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

const (
	sheetWidth   = 13 * vg.Inch
	rowHeight    = 1.45 * vg.Inch // of a component
	sumHeight    = 2.3 * vg.Inch
	sheetMargin  = 0.9 * vg.Inch // for the axis and the title together
	sheetPoints  = 6000
	sheetName    = 8.5 // size of the names of lines
	exampleEmits = 0.6 // peak of each emission component in the example, over the continuum
	exampleDepth = 0.3 // depth of each absorption component
)

var inkSum = color.Gray{25}

// sheet is a family drawn component by component over rest wavelength.
type sheet struct {
	family *pipeline.Template
	z      float64
	wave   []float64
	rows   []sheetRow
	sum    []float64
}

// sheetRow is one component at the amplitude of the example.
type sheetRow struct {
	title      string
	absorption bool
	values     []float64
	names      []sheetMark
}

type sheetMark struct {
	text string
	wave float64
}

// newSheet draws the components at a redshift, each as strong as in the
// example: emission to a peak of exampleEmits, absorption to a depth of
// exampleDepth, composites and the forest as they are.
func newSheet(f *pipeline.Template, z float64) *sheet {
	width := f.Widths[0]
	first, last := f.Span(width)
	first, last = first*0.97, last*1.03
	s := &sheet{family: f, z: z, wave: make([]float64, sheetPoints), sum: make([]float64, sheetPoints)}
	for i := range s.wave {
		s.wave[i] = first * math.Pow(last/first, float64(i)/(sheetPoints-1))
		s.sum[i] = 1
	}
	for c, v := range f.View(width) {
		row := sheetRow{title: v.Name + ", emission", absorption: v.Absorption, values: f.Curve(c, z, width, first, last, sheetPoints)}
		if v.Absorption {
			row.title = v.Name + ", absorption"
		}
		most, scale := 0.0, exampleEmits
		for _, y := range row.values {
			most = math.Max(most, math.Abs(y))
		}
		if v.Absorption {
			scale = exampleDepth
		}
		for _, shape := range v.Shapes {
			switch shape.Kind {
			case "stack", "forest":
				scale = most // as it is
			case "stark": // its lines follow
			case "line":
				row.names = append(row.names, sheetMark{orNot(shape.Name, fmt.Sprintf("%.0f", shape.Wave)), shape.Wave})
			default:
				row.names = append(row.names, sheetMark{fmt.Sprintf("%s %.0f", shape.Kind, shape.Wave), shape.Wave})
			}
		}
		slices.SortStableFunc(row.names, func(a, b sheetMark) int { return cmp.Compare(a.wave, b.wave) })
		for i := range row.values {
			if most > 0 {
				row.values[i] *= scale / most
			}
			s.sum[i] += row.values[i]
		}
		s.rows = append(s.rows, row)
	}
	for i, y := range s.sum {
		s.sum[i] = math.Max(0, y)
	}
	return s
}

// saveTemplate draws a family into a PNG file.
func saveTemplate(path string, f *pipeline.Template, z float64) error {
	s := newSheet(f, z)
	height := sheetMargin + sumHeight + rowHeight*vg.Length(len(s.rows))
	return savePNG(path, sheetWidth, height, s.draw)
}

// draw lays the rows out from the top: the sum, then the components.
func (s *sheet) draw(c draw.Canvas) {
	title := labelStyle(13, color.Black)
	title.XAlign, title.YAlign = draw.XCenter, draw.YTop
	text := fmt.Sprintf("%s (%s), %g km/s", s.family.Name, s.family.Class, s.family.Widths[0])
	if s.family.Forested() {
		text += fmt.Sprintf(", forest at z = %g", s.z)
	}
	c.FillText(title, vg.Point{X: (c.Min.X + c.Max.X) / 2, Y: c.Max.Y - 6}, text)
	top := c.Max.Y - 0.3*vg.Inch
	row := func(height vg.Length, r *sheetRow, title string, ink color.Color, values []float64, last bool) {
		extra := vg.Length(0)
		if last {
			extra = 0.4 * vg.Inch
		}
		area := c
		area.Min.X, area.Max.X = c.Min.X+0.7*vg.Inch, c.Max.X-0.2*vg.Inch
		area.Max.Y, area.Min.Y = top-4, top-height
		s.panel(area, r, title, ink, values)
		if last {
			s.axis(area)
		}
		top -= height + extra
	}
	row(sumHeight, nil, fmt.Sprintf("example sum over the continuum: emission to %g, absorption to %g, forest and composite as they are",
		exampleEmits, exampleDepth), inkSum, s.sum, false)
	for i := range s.rows {
		r := &s.rows[i]
		ink := color.Color(inkEmission)
		if r.absorption {
			ink = inkAbsorption
		}
		row(rowHeight, r, r.title, ink, r.values, i == len(s.rows)-1)
	}
}

// x returns the place of a rest wavelength: the axis is logarithmic.
func (s *sheet) x(area draw.Canvas, wave float64) vg.Length {
	first, last := s.wave[0], s.wave[len(s.wave)-1]
	return area.Min.X + (area.Max.X-area.Min.X)*vg.Length(math.Log(wave/first)/math.Log(last/first))
}

// panel draws one curve in its frame, with the names of its lines above.
func (s *sheet) panel(area draw.Canvas, r *sheetRow, title string, ink color.Color, values []float64) {
	style := labelStyle(sheetName, ink)
	style.Rotation = math.Pi / 2
	style.XAlign, style.YAlign = draw.XLeft, draw.YCenter
	var names vg.Length
	if r != nil {
		for _, m := range r.names {
			names = max(names, style.Width(m.text))
		}
	}
	if names > 0 {
		names += leaderLength / 2
	}
	head := labelStyle(10, color.Black)
	head.YAlign = draw.YTop
	low, high := 0.0, 0.0
	for _, v := range values {
		low, high = math.Min(low, v), math.Max(high, v)
	}
	if high == low {
		high = low + 1
	}
	bottom, top := area.Min.Y+4, area.Max.Y-20-names
	y := func(v float64) vg.Length { return bottom + (top-bottom)*vg.Length((v-low)/(high-low)) }
	frame := draw.LineStyle{Color: color.Gray{190}, Width: 0.6}
	c := area
	c.StrokeLines(frame, []vg.Point{{X: area.Min.X, Y: area.Min.Y}, {X: area.Max.X, Y: area.Min.Y}, {X: area.Max.X, Y: area.Max.Y},
		{X: area.Min.X, Y: area.Max.Y}, {X: area.Min.X, Y: area.Min.Y}})
	c.StrokeLine2(draw.LineStyle{Color: color.Gray{150}, Width: 0.5, Dashes: []vg.Length{3, 3}}, area.Min.X, y(0), area.Max.X, y(0))
	var line []vg.Point
	for i, v := range values {
		line = append(line, vg.Point{X: s.x(area, s.wave[i]), Y: y(v)})
	}
	c.StrokeLines(draw.LineStyle{Color: ink, Width: 1}, line)
	c.FillText(head, vg.Point{X: area.Min.X + 5, Y: area.Max.Y - 3}, title)
	label := labelStyle(9, color.Black)
	label.XAlign, label.YAlign = draw.XRight, draw.YCenter
	for _, v := range []float64{low, high} {
		c.FillText(label, vg.Point{X: area.Min.X - 4, Y: y(v)}, fmt.Sprintf("%.2g", v+0))
	}
	if r != nil {
		s.nameLines(area, r, style, top, names)
	}
}

// nameLines writes the names of the lines of a row upright, apart from one
// another, in the band above its curve.
func (s *sheet) nameLines(area draw.Canvas, r *sheetRow, style draw.TextStyle, top, band vg.Length) {
	wanted := make([]float64, len(r.names))
	for i, m := range r.names {
		wanted[i] = float64(s.x(area, m.wave))
	}
	leader := draw.LineStyle{Color: color.Gray{150}, Width: 0.5}
	for i, x := range spread(wanted, labelGap-1, float64(area.Min.X)+labelGap, float64(area.Max.X)-labelGap) {
		at := vg.Length(x)
		area.StrokeLines(leader, []vg.Point{{X: vg.Length(wanted[i]), Y: top}, {X: at, Y: top + leaderLength/2 - 2}})
		area.FillText(style, vg.Point{X: at, Y: top + leaderLength/2}, r.names[i].text)
	}
}

// axis draws the rest wavelengths below a panel.
func (s *sheet) axis(area draw.Canvas) {
	first, last := s.wave[0], s.wave[len(s.wave)-1]
	style := labelStyle(10, color.Black)
	style.XAlign, style.YAlign = draw.XCenter, draw.YTop
	right := vg.Length(math.Inf(-1))
	for _, wave := range roundWaves(first, last) {
		x, text := s.x(area, wave), fmt.Sprintf("%.0f", wave)
		area.StrokeLine2(draw.LineStyle{Color: color.Black, Width: 0.6}, x, area.Min.Y, x, area.Min.Y-tickLength)
		if half := style.Width(text) / 2; x-half > right {
			area.FillText(style, vg.Point{X: x, Y: area.Min.Y - tickLength - 2}, text)
			right = x + half + 6
		}
	}
	area.FillText(style, vg.Point{X: (area.Min.X + area.Max.X) / 2, Y: area.Min.Y - tickLength - 16}, "rest wavelength in vacuum [Å], logarithmic")
}

// roundWaves returns the multiples of a round step between two wavelengths, at
// most 40 of them if they were all as close as the first.
func roundWaves(low, high float64) []float64 {
	step := 100.0
	for _, k := range []float64{100, 200, 500, 1000, 2000} {
		if step = k; math.Log(high/low)/math.Log(1+k/low) < 40 {
			break
		}
	}
	var waves []float64
	for v := math.Ceil(low/step) * step; v <= high; v += step {
		waves = append(waves, v)
	}
	return waves
}
