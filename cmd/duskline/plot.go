package main

import (
	"bytes"
	"fmt"
	"image/color"
	"math"
	"os"
	"strings"

	"duskline/pipeline"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
)

const (
	pictureWidth  = 13 * vg.Inch
	pictureHeight = 6 * vg.Inch
	pictureDPI    = 110
	captionHeight = 22 // points below the plot
	labelSize     = 10.5
	labelGap      = 12 // points between neighboring names
	leaderLength  = 20 // points that the leaders need in the band of the names
	tickLength    = 5
)

var (
	inkPixels     = color.Gray{205}
	inkSmooth     = color.Gray{25}
	inkSigma      = color.RGBA{120, 170, 215, 255}
	inkContinuum  = color.RGBA{214, 69, 33, 255}
	inkEmission   = color.RGBA{16, 92, 166, 255}
	inkAbsorption = color.RGBA{120, 40, 120, 255}
)

// savePicture draws a picture into a PNG file.
func savePicture(path string, p *picture) error {
	return savePNG(path, pictureWidth, pictureHeight, p.draw)
}

// savePNG draws onto an empty canvas and writes it to a file.
func savePNG(path string, width, height vg.Length, paint func(draw.Canvas)) error {
	canvas := vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(width, height), vgimg.UseDPI(pictureDPI))}
	paint(draw.New(canvas))
	var png bytes.Buffer
	if _, err := canvas.WriteTo(&png); err != nil {
		return fmt.Errorf("the picture cannot be drawn: %w", err)
	}
	if err := os.WriteFile(path, png.Bytes(), 0o666); err != nil {
		return fmt.Errorf("the picture cannot be written: %w", err)
	}
	return nil
}

func (p *picture) draw(c draw.Canvas) {
	pl := plot.New()
	pl.Title.Text = p.title
	pl.Title.TextStyle.Font.Size = 13
	pl.Title.Padding = 6
	pl.X.Label.Text = "wavelength in vacuum, barycentric [Å]"
	pl.Y.Label.Text = p.fluxLabel
	pl.X.Padding, pl.Y.Padding = 0, 0
	if !math.IsNaN(p.redshift) {
		pl.Title.Padding = 30 // room for the rest-frame axis
	}
	if n := len(p.wave); n > 0 {
		pl.X.Min, pl.X.Max = p.wave[0], p.wave[n-1]
	}
	pl.Y.Min, pl.Y.Max = p.height(p.low), p.height(p.high)
	pl.X.Tick.Marker, pl.Y.Tick.Marker = p.waveTicks(), evenTicks{6}
	if p.logWave {
		pl.X.Scale = plot.LogScale{}
	}
	if p.logFlux {
		pl.Y.Tick.Marker = powers{logTicks{7}}
	}
	if !p.logFlux {
		pl.Add(zeroLine{})
	}
	for _, curve := range []trace{
		{p, p.sigma, draw.LineStyle{Color: inkSigma, Width: 0.8}},
		{p, p.flux, draw.LineStyle{Color: inkPixels, Width: 0.6}},
		{p, p.smooth, draw.LineStyle{Color: inkSmooth, Width: 0.9}},
		{p, p.continuum, draw.LineStyle{Color: inkContinuum, Width: 1.4}},
	} {
		pl.Add(curve)
	}
	names := &lineNames{picture: p, above: p.pick(true), below: p.pick(false)}
	names.makeRoom(pl)
	pl.Add(names)
	if !math.IsNaN(p.redshift) {
		pl.Add(restAxis{1 + p.redshift, p.waveTicks()})
	}
	if len(p.wave) == 0 {
		pl.HideAxes()
		pl.X.Label.Text, pl.Y.Label.Text = "", ""
		pl.Draw(c)
		c.FillText(labelStyle(14, color.Black), vg.Point{X: c.Min.X + 60, Y: c.Center().Y}, "no usable pixel: "+p.flags)
		return
	}
	pl.Draw(draw.Crop(c, 6, -22, captionHeight, -8))
	p.caption(c)
}

// height is where a flux stands on its axis, itself or its log10; what is too low for
// the latter stands below the axis.
func (p *picture) height(flux float64) float64 {
	if p.logFlux {
		return math.Log10(math.Max(flux, 0.1*p.low))
	}
	return flux
}

// waveTicks places the ticks of wavelength axes.
func (p *picture) waveTicks() plot.Ticker {
	if p.logWave {
		return logTicks{12}
	}
	return evenTicks{9}
}

// pick returns the marks in emission or in absorption inside the plot.
func (p *picture) pick(emission bool) []pipeline.Mark {
	var out []pipeline.Mark
	for _, m := range p.marks {
		if n := len(p.wave); m.Emission == emission && n > 0 && m.Wave > p.wave[0] && m.Wave < p.wave[n-1] {
			out = append(out, m)
		}
	}
	return out
}

func labelStyle(size vg.Length, ink color.Color) text.Style {
	return text.Style{Color: ink, Font: font.From(plot.DefaultFont, size), Handler: plot.DefaultTextHandler}
}

// caption says below the plot what the colors mean.
func (p *picture) caption(c draw.Canvas) {
	x, y := c.Min.X+60, c.Min.Y+captionHeight/2
	for _, entry := range []struct {
		ink  color.Color
		says string
	}{
		{inkPixels, "pixels"}, {inkSmooth, fmt.Sprintf("smoothed, sigma %g pixels", smoothPixels)}, {inkContinuum, "continuum"},
		{inkSigma, "1-sigma error"}, {inkEmission, "emission lines"}, {inkAbsorption, "absorption lines"},
	} {
		c.StrokeLine2(draw.LineStyle{Color: entry.ink, Width: 2.5}, x, y, x+18, y)
		style := labelStyle(10, color.Black)
		style.YAlign = draw.YCenter
		c.FillText(style, vg.Point{X: x + 23, Y: y}, entry.says)
		x += 23 + style.Width(entry.says) + 22
	}
	style := labelStyle(10, color.Gray{90})
	style.XAlign, style.YAlign = draw.XRight, draw.YCenter
	if flags := shortened(p.flags, func(s string) bool { return style.Width(s) < c.Max.X-8-x }); flags != "" {
		c.FillText(style, vg.Point{X: c.Max.X - 8, Y: y}, flags)
	}
}

// shortened leaves out the last entries of a list until it fits.
func shortened(list string, fits func(string) bool) string {
	parts := strings.Split(list, ", ")
	for n := len(parts); n > 0; n-- {
		short := strings.Join(parts[:n], ", ")
		if n < len(parts) {
			short += " ..."
		}
		if fits(short) {
			return short
		}
	}
	return ""
}

// trace is a curve that is interrupted where it is NaN and cut at the flux
// range, so that spikes do not run through the names of lines.
type trace struct {
	picture *picture
	y       []float64
	style   draw.LineStyle
}

// Plot implements plot.Plotter.
func (t trace) Plot(c draw.Canvas, p *plot.Plot) {
	toX, toY := p.Transforms(&c)
	inside := c
	height := t.picture.height
	inside.Min.Y, inside.Max.Y = toY(height(t.picture.low)), toY(height(t.picture.high))
	var line []vg.Point
	for i, x := range t.picture.wave {
		if math.IsNaN(t.y[i]) {
			c.StrokeLines(t.style, inside.ClipLinesXY(line)...)
			line = nil
			continue
		}
		line = append(line, vg.Point{X: toX(x), Y: toY(height(t.y[i]))})
	}
	c.StrokeLines(t.style, inside.ClipLinesXY(line)...)
}

// zeroLine is a thin line at zero flux.
type zeroLine struct{}

// Plot implements plot.Plotter.
func (zeroLine) Plot(c draw.Canvas, p *plot.Plot) {
	if p.Y.Min > 0 || p.Y.Max < 0 {
		return
	}
	_, toY := p.Transforms(&c)
	c.StrokeLine2(draw.LineStyle{Color: color.Gray{170}, Width: 0.5, Dashes: []vg.Length{3, 3}}, c.Min.X, toY(0), c.Max.X, toY(0))
}

// lineNames writes the names of lines upright above (emission) and below
// (absorption) the spectrum, apart from one another, with a leader to the line.
type lineNames struct {
	picture      *picture
	above, below []pipeline.Mark
}

// band returns the height that the names of a row take.
func band(marks []pipeline.Mark) vg.Length {
	if len(marks) == 0 {
		return 0
	}
	style := labelStyle(labelSize, color.Black)
	var longest vg.Length
	for _, m := range marks {
		longest = max(longest, style.Width(m.Label))
	}
	return longest + leaderLength + 6
}

// makeRoom widens the flux axis so that the names have bands of their own. The
// height of the plot in points is known well enough for that.
func (l *lineNames) makeRoom(pl *plot.Plot) {
	const inner = pictureHeight - 130
	above, below := band(l.above), band(l.below)
	perPoint := (pl.Y.Max - pl.Y.Min) / float64(inner-above-below)
	pl.Y.Max += float64(above) * perPoint
	pl.Y.Min -= float64(below) * perPoint
}

// Plot implements plot.Plotter.
func (l *lineNames) Plot(c draw.Canvas, p *plot.Plot) {
	l.row(c, p, l.above, true)
	l.row(c, p, l.below, false)
}

func (l *lineNames) row(c draw.Canvas, p *plot.Plot, marks []pipeline.Mark, above bool) {
	toX, toY := p.Transforms(&c)
	wanted := make([]float64, len(marks))
	for i, m := range marks {
		wanted[i] = float64(toX(m.Wave))
	}
	ink, direction, edge := color.Color(inkEmission), vg.Length(1), c.Max.Y-band(marks)
	if !above {
		ink, direction, edge = inkAbsorption, -1, c.Min.Y+band(marks)
	}
	style := labelStyle(labelSize, ink)
	style.Rotation = math.Pi / 2
	style.YAlign = draw.YCenter
	style.XAlign = draw.XLeft
	if !above {
		style.XAlign = draw.XRight
	}
	leader := draw.LineStyle{Color: ink, Width: 0.6}
	for i, x := range spread(wanted, labelGap, float64(c.Min.X)+labelGap/2, float64(c.Max.X)-labelGap/2) {
		at, line := vg.Length(x), vg.Length(wanted[i])
		from := toY(l.picture.height(l.touch(marks[i].Wave, above))) + 5*direction
		c.StrokeLines(leader, []vg.Point{{X: line, Y: from}, {X: line, Y: edge + 4*direction}, {X: at, Y: edge + (leaderLength-2)*direction}})
		c.FillText(style, vg.Point{X: at, Y: edge + leaderLength*direction}, marks[i].Label)
	}
}

// touch returns the flux at which the leader of a line ends, clear of the
// spectrum around the line and inside the range.
func (l *lineNames) touch(wave float64, above bool) float64 {
	p := l.picture
	y := math.NaN()
	for i := range p.wave {
		if math.Abs(p.wave[i]-wave) > 6e-4*wave {
			continue
		}
		for _, f := range []float64{p.smooth[i], p.continuum[i]} {
			if math.IsNaN(y) || above && f > y || !above && f < y {
				y = f
			}
		}
	}
	if math.IsNaN(y) {
		y = (p.low + p.high) / 2
	}
	return math.Max(p.low, math.Min(p.high, y))
}

// restAxis draws the rest-frame wavelengths along the upper edge.
type restAxis struct {
	factor float64 // 1 + z
	ticks  plot.Ticker
}

// Plot implements plot.Plotter.
func (r restAxis) Plot(c draw.Canvas, p *plot.Plot) {
	toX, _ := p.Transforms(&c)
	line := draw.LineStyle{Color: color.Black, Width: 0.5}
	c.StrokeLine2(line, c.Min.X, c.Max.Y, c.Max.X, c.Max.Y)
	style := labelStyle(10, color.Black)
	style.XAlign, style.YAlign = draw.XCenter, draw.YBottom
	for _, t := range r.ticks.Ticks(p.X.Min/r.factor, p.X.Max/r.factor) {
		x := toX(t.Value * r.factor)
		c.StrokeLine2(line, x, c.Max.Y, x, c.Max.Y+tickLength)
		c.FillText(style, vg.Point{X: x, Y: c.Max.Y + tickLength + 1}, t.Label)
	}
	// At the left edge of the picture, where no tick label reaches.
	style.XAlign = draw.XLeft
	c.FillText(style, vg.Point{X: 4, Y: c.Max.Y + tickLength + 1}, "rest [Å]")
}

// evenTicks places about n labeled ticks at steps of 1, 2 or 5 times a power of
// ten.
type evenTicks struct{ n int }

// Ticks implements plot.Ticker.
func (e evenTicks) Ticks(low, high float64) []plot.Tick {
	step := math.Pow(10, math.Floor(math.Log10((high-low)/float64(e.n))))
	for _, k := range []float64{1, 2, 5, 10} {
		if (high-low)/(k*step) <= float64(e.n) {
			step *= k
			break
		}
	}
	decimals := int(math.Max(0, -math.Floor(math.Log10(step)+1e-9)))
	var ticks []plot.Tick
	for i := math.Ceil(low / step); i*step <= high*(1+1e-12); i++ {
		value := i*step + 0 // no minus before a zero
		ticks = append(ticks, plot.Tick{Value: value, Label: fmt.Sprintf("%.*f", decimals, value)})
	}
	return ticks
}

// logTicks places at most n labeled ticks on a logarithmic axis: at as many round
// multiples of the powers of ten as there is room for.
type logTicks struct{ n int }

// Ticks implements plot.Ticker.
func (l logTicks) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	for _, multiples := range [][]float64{{1, 1.5, 2, 3, 4, 5, 6, 8}, {1, 2, 5}, {1, 3}, {1}} {
		ticks = nil
		for e := math.Floor(math.Log10(low)); e <= math.Log10(high); e++ {
			for _, k := range multiples {
				if v := k * math.Pow(10, e); v >= low && v <= high {
					ticks = append(ticks, plot.Tick{Value: v, Label: fmt.Sprintf("%.6g", v)})
				}
			}
		}
		if len(ticks) <= l.n {
			break
		}
	}
	return ticks
}

// powers places logTicks on an axis of log10.
type powers struct{ of logTicks }

// Ticks implements plot.Ticker.
func (p powers) Ticks(low, high float64) []plot.Tick {
	ticks := p.of.Ticks(math.Pow(10, low), math.Pow(10, high))
	for i := range ticks {
		ticks[i].Value = math.Log10(ticks[i].Value)
	}
	return ticks
}
