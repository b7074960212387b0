package main

import (
	"image/color"
	"io"
	"math"

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

// smallestInfidelity stands for an exact trial on the logarithmic axis.
const smallestInfidelity = 1e-6

// plotSurvey draws the deviation from the exact energy, or the energy where that
// is not known, against the quality of the trial, as SVG. Without two points
// that can be drawn nothing is written.
func plotSurvey(name string, points []*point) error {
	deviations, infidelities := 0, 0
	unit := ""
	for _, q := range points {
		if q.Deviation != nil {
			deviations++
		}
		if q.TrialInfidelity != nil {
			infidelities++
		}
		if unit == "" {
			unit = symbol(q.Unit)
		}
	}
	exact, quality := deviations >= 2, infidelities >= 2
	var data errorPoints
	for _, q := range points {
		x, y, scale := q.TrialEnergy, q.Energy, 1.0
		if quality {
			x = q.TrialInfidelity
		}
		if exact {
			y, scale = q.Deviation, 1000
		}
		if x == nil || y == nil || q.Error == nil {
			continue
		}
		at := *x
		if quality {
			at = math.Max(at, smallestInfidelity)
		}
		data.XYs = append(data.XYs, plotter.XY{X: at, Y: scale * *y})
		data.YErrors = append(data.YErrors, struct{ Low, High float64 }{scale * *q.Error, scale * *q.Error})
	}
	if len(data.XYs) < 2 {
		return nil
	}
	p := plot.New()
	p.Title.Text = "energy against trial energy"
	p.X.Label.Text, p.Y.Label.Text = "trial energy, "+unit, "energy, "+unit
	if quality {
		p.Title.Text = "energy against trial quality"
		p.X.Label.Text = "trial infidelity"
		p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, plot.LogTicks{Prec: 1}
	}
	if exact {
		p.Y.Label.Text = "deviation, 10⁻³ " + unit
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
	frame(p, quality, exact)
	if exact {
		zero, err := plotter.NewLine(plotter.XYs{{X: p.X.Min, Y: 0}, {X: p.X.Max, Y: 0}})
		if err != nil {
			return err
		}
		zero.Color = color.Gray{Y: 90}
		p.Add(zero)
	}
	canvas, err := p.WriterTo(16*vg.Centimeter, 11*vg.Centimeter, "svg")
	if err != nil {
		return err
	}
	return writeFile(name, func(w io.Writer) error {
		_, err := canvas.WriteTo(w)
		return err
	})
}

// frame widens the axes so that no point or bar sits on an edge; a plot of
// deviations always shows zero.
func frame(p *plot.Plot, logarithmic, zero bool) {
	if zero {
		p.Y.Min, p.Y.Max = math.Min(p.Y.Min, 0), math.Max(p.Y.Max, 0)
	}
	pad := 0.06 * math.Max(p.Y.Max-p.Y.Min, 1e-9)
	p.Y.Min, p.Y.Max = p.Y.Min-pad, p.Y.Max+pad
	if logarithmic {
		p.X.Min, p.X.Max = p.X.Min/1.6, p.X.Max*1.6
		return
	}
	pad = 0.06 * math.Max(p.X.Max-p.X.Min, 1e-9)
	p.X.Min, p.X.Max = p.X.Min-pad, p.X.Max+pad
}
