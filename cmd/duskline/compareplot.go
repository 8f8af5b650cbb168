package main

import (
	"fmt"
	"image/color"
	"math"
	"path/filepath"

	"duskline/catalog"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// saveComparison draws what changed: redshifts.png, velocities.png and
// lines.png.
func saveComparison(folder string, c *catalog.Comparison) error {
	for name, make := range map[string]func(*catalog.Comparison) (*plot.Plot, error){
		"redshifts.png": plotRedshifts, "velocities.png": plotVelocities, "lines.png": plotLines,
	} {
		p, err := make(c)
		if err != nil {
			return fmt.Errorf("%s cannot be drawn: %w", name, err)
		}
		if err := savePNG(filepath.Join(folder, name), 9*vg.Inch, 6.5*vg.Inch, func(c draw.Canvas) {
			p.Draw(draw.Crop(c, 8, -14, 8, -8))
		}); err != nil {
			return err
		}
	}
	return nil
}

// pointsMost bounds the points of a picture.
const pointsMost = 5000

// weightInk orders colors from the most to the least significant.
var weightInk = []struct {
	weight catalog.Weight
	ink    color.Color
}{
	{catalog.AnswerChanged, color.Gray{150}},
	{catalog.SecureChanged, inkEmission},
	{catalog.Contradiction, inkContinuum},
}

// plotRedshifts shows the new redshift over the old one for objects whose answer
// changed.
func plotRedshifts(c *catalog.Comparison) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text = fmt.Sprintf("Redshifts of the objects whose answer changed (%d of %d)",
		c.ByWeight[catalog.Contradiction]+c.ByWeight[catalog.SecureChanged]+c.ByWeight[catalog.AnswerChanged], c.Matched)
	p.X.Label.Text, p.Y.Label.Text = "redshift before", "redshift now"
	top := 0.1
	for _, w := range weightInk {
		var points plotter.XYs
		for i := range c.Changes {
			d := &c.Changes[i]
			if d.Weight == w.weight && !math.IsNaN(d.Kms) && len(points) < pointsMost {
				points = append(points, plotter.XY{X: d.Old.Redshift, Y: d.New.Redshift})
				top = max(top, d.Old.Redshift, d.New.Redshift)
			}
		}
		if err := addPoints(p, points, w.ink, w.weight.String()); err != nil {
			return nil, err
		}
	}
	line, err := plotter.NewLine(plotter.XYs{{X: 0, Y: 0}, {X: top, Y: top}})
	if err != nil {
		return nil, err
	}
	line.Color, line.Width = color.Gray{190}, 0.7
	p.Add(line)
	p.X.Tick.Marker, p.Y.Tick.Marker = evenTicks{8}, evenTicks{8}
	p.Legend.Top, p.Legend.Left = true, true
	p.Legend.Padding, p.Legend.XOffs = 3, 8
	return p, nil
}

func addPoints(p *plot.Plot, points plotter.XYs, ink color.Color, name string) error {
	if len(points) == 0 {
		return nil
	}
	s, err := plotter.NewScatter(points)
	if err != nil {
		return err
	}
	s.GlyphStyle = draw.GlyphStyle{Color: ink, Radius: 2, Shape: draw.CircleGlyph{}}
	p.Add(s)
	if name != "" {
		p.Legend.Add(fmt.Sprintf("%s (%d)", name, len(points)), s)
	}
	return nil
}

// plotVelocities shows by how many errors redshifts moved, all objects.
func plotVelocities(c *catalog.Comparison) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text = "Changes of redshift over their errors, all objects with a redshift in both"
	p.X.Label.Text, p.Y.Label.Text = "(new - old) / error, the ends hold all beyond", "log10 of objects + 1"
	var bars plotter.XYs
	c.Redshifts.Each(func(low float64, n int64) {
		y := math.Log10(float64(n) + 1)
		bars = append(bars, plotter.XY{X: low, Y: 0}, plotter.XY{X: low, Y: y}, plotter.XY{X: low + 0.1, Y: y}, plotter.XY{X: low + 0.1, Y: 0})
	})
	area, err := plotter.NewPolygon(bars)
	if err != nil {
		return nil, err
	}
	area.Color = inkSigma
	area.LineStyle = draw.LineStyle{Color: inkEmission, Width: 0.5}
	p.Add(area)
	p.Y.Max *= headroom
	for _, x := range []float64{-c.Limit, c.Limit} {
		line, err := plotter.NewLine(plotter.XYs{{X: x, Y: 0}, {X: x, Y: p.Y.Max}})
		if err != nil {
			return nil, err
		}
		line.Color, line.Width = inkContinuum, 0.8
		p.Add(line)
	}
	return p, nil
}

// headroom keeps what is highest off the edge.
const headroom = 1.05

// linesMost bounds the lines of a picture.
const linesMost = 40

// plotLines shows how far equivalent widths moved, a line a column: median, and
// the middle 68 %.
func plotLines(c *catalog.Comparison) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text = "Changes of equivalent width over their errors: median and middle 68 %"
	p.Y.Label.Text = "(new - old) / error"
	names := shiftedLines(c)
	names = names[:min(len(names), linesMost)]
	var middle plotter.XYs
	labels := make([]string, 0, len(names))
	for _, name := range names {
		s := c.Lines[name]
		if s.Compared == 0 {
			continue
		}
		x := float64(len(labels))
		labels = append(labels, name)
		middle = append(middle, plotter.XY{X: x, Y: s.Quantile(0.5)})
		bar, err := plotter.NewLine(plotter.XYs{{X: x, Y: s.Quantile(0.16)}, {X: x, Y: s.Quantile(0.84)}})
		if err != nil {
			return nil, err
		}
		bar.Color, bar.Width = inkSigma, 3
		p.Add(bar)
	}
	if len(labels) == 0 {
		p.X.Label.Text = "no line changed"
		return p, nil
	}
	if err := addPoints(p, middle, inkContinuum, ""); err != nil {
		return nil, err
	}
	p.NominalX(labels...)
	p.X.Tick.Label.Rotation = math.Pi / 2
	p.X.Tick.Label.XAlign, p.X.Tick.Label.YAlign = draw.XRight, draw.YCenter
	p.Add(zeroLine{})
	p.Y.Min, p.Y.Max = p.Y.Min*headroom, p.Y.Max*headroom // zero is between them
	return p, nil
}
