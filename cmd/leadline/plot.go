package main

import (
	"image/color"
	"io"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// errorPoints are points with error bars.
type errorPoints struct {
	plotter.XYs
	plotter.YErrors
}

// plotSurvey draws the deviation from the exact energy, or the energy where that
// is not known, against the quality of the trial, as SVG. Without two points
// that can be drawn nothing is written.
func plotSurvey(name string, points []*point) error {
	var data errorPoints
	p := plot.New()
	p.X.Label.Text = "trial energy"
	p.Y.Label.Text = "energy"
	milli := 1.0
	exact := len(points) > 0 && points[0].Deviation != nil
	if exact {
		p.Y.Label.Text = "energy − exact energy, 1/1000 of the unit"
		milli = 1000
	}
	if len(points) > 0 && points[0].TrialInfidelity != nil {
		p.X.Label.Text = "trial infidelity"
	}
	for _, q := range points {
		x, y := q.TrialEnergy, q.Energy
		if q.TrialInfidelity != nil {
			x = q.TrialInfidelity
		}
		if exact {
			y = q.Deviation
		}
		if x == nil || y == nil || q.Error == nil {
			continue
		}
		data.XYs = append(data.XYs, plotter.XY{X: *x, Y: milli * *y})
		data.YErrors = append(data.YErrors, struct{ Low, High float64 }{milli * *q.Error, milli * *q.Error})
	}
	if len(data.XYs) < 2 {
		return nil
	}
	scatter, err := plotter.NewScatter(data)
	if err != nil {
		return err
	}
	scatter.GlyphStyle = draw.GlyphStyle{Color: color.RGBA{R: 30, G: 90, B: 160, A: 255}, Radius: vg.Points(3), Shape: draw.CircleGlyph{}}
	bars, err := plotter.NewYErrorBars(data)
	if err != nil {
		return err
	}
	bars.Color = scatter.Color
	p.Add(plotter.NewGrid(), bars, scatter)
	if exact {
		zero := plotter.NewFunction(func(float64) float64 { return 0 })
		zero.Color = color.Gray{Y: 100}
		p.Add(zero)
	}
	canvas, err := p.WriterTo(14*vg.Centimeter, 10*vg.Centimeter, "svg")
	if err != nil {
		return err
	}
	return writeFile(name, func(w io.Writer) error {
		_, err := canvas.WriteTo(w)
		return err
	})
}
