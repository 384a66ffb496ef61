package publish

import (
	"fmt"
	"math"

	"codeberg.org/go-pdf/fpdf"
)

// The drawing on the certificate is the one of curve.svg, on paper.
const (
	drawingHeightMM = 116.0
	tubeMM          = 9.0
)

// plot maps readings and corrections to the paper.
type plot struct {
	top, height, left, right float64
	capacityML, spreadML     float64
}

func (g plot) y(readingML float64) float64 { return g.top + readingML/g.capacityML*g.height }

func (g plot) x(correctionML float64) float64 {
	return (g.left+g.right)/2 + correctionML/g.spreadML*(g.right-g.left)/2
}

func (p *pdfPage) drawing(m Material) error {
	limit := 0.0
	if c := m.Document.Conformity; c != nil {
		limit = c.MPEML
	}
	g := plot{
		top: p.GetY() + 8, height: drawingHeightMM - 22, left: pageMargin + 46, right: pageMargin + p.width - 6,
		capacityML: m.Document.Run.Burette.CapacityML.Float(), spreadML: limit * 1.25,
	}
	for _, point := range m.Curve.Points {
		g.spreadML = max(g.spreadML, (math.Abs(point.CorrectionML)+point.ExpandedML)*1.15)
	}
	if err := p.band(m, g); err != nil {
		return err
	}
	p.tube(g, m.Document.Run.Burette.SubdivisionML.Float())
	p.limits(g, limit)
	p.curve(m, g)
	p.SetXY(pageMargin, g.top+g.height+12)
	return nil
}

// tube draws the glass with every line of its scale.
func (p *pdfPage) tube(g plot, subdivisionML float64) {
	x := pageMargin + 14.0
	p.SetDrawColor(69, 96, 110)
	p.SetLineWidth(0.25)
	p.Rect(x, g.top-4, tubeMM, g.height+4, "D")
	p.Polygon([]fpdf.PointType{{X: x, Y: g.top + g.height}, {X: x + tubeMM, Y: g.top + g.height}, {X: x + tubeMM/2, Y: g.top + g.height + 5}}, "D")
	p.SetFont("go", "", 7.5)
	for i := range int(math.Round(g.capacityML/subdivisionML)) + 1 {
		v := float64(i) * subdivisionML
		length, width := 0.3, 0.08
		switch {
		case i%10 == 0:
			length, width = 1, 0.2
		case i%5 == 0:
			length, width = 0.55, 0.1
		}
		p.SetLineWidth(width)
		p.Line(x, g.y(v), x+tubeMM*length, g.y(v))
		if i%50 == 0 {
			p.SetXY(x-13, g.y(v)-2)
			p.CellFormat(12, 4, fmt.Sprintf("%g", v), "", 0, "R", false, 0, "")
		}
	}
	p.SetXY(x-13, g.top-7)
	p.CellFormat(12, 4, "mL", "", 0, "R", false, 0, "")
}

// band fills the expanded uncertainty between the points as well.
func (p *pdfPage) band(m Material, g plot) error {
	first, last := m.Curve.FirstML, m.Curve.Points[len(m.Curve.Points)-1].ReadingML
	var low, high []fpdf.PointType
	for i := range drawnSteps + 1 {
		v := first + (last-first)*float64(i)/drawnSteps
		at, err := m.Curve.At(v)
		if err != nil {
			return err
		}
		low = append(low, fpdf.PointType{X: g.x(at.CorrectionML - at.ExpandedML), Y: g.y(v)})
		high = append([]fpdf.PointType{{X: g.x(at.CorrectionML + at.ExpandedML), Y: g.y(v)}}, high...)
	}
	p.SetFillColor(211, 228, 236)
	p.Polygon(append(low, high...), "F")
	return nil
}

func (p *pdfPage) limits(g plot, limitML float64) {
	p.SetDrawColor(20, 26, 30)
	p.SetLineWidth(0.2)
	p.Line(g.x(0), g.top, g.x(0), g.top+g.height)
	p.label(g, 0, "0")
	if limitML > 0 {
		p.SetDrawColor(138, 59, 18)
		p.SetDashPattern([]float64{2, 1.2}, 0)
		for _, limit := range []float64{-limitML, limitML} {
			p.Line(g.x(limit), g.top, g.x(limit), g.top+g.height)
			p.label(g, limit, fmt.Sprintf("%+g class limit", limit))
		}
		p.SetDashPattern(nil, 0)
	}
	p.SetXY(g.left, g.top+g.height+5)
	p.SetFont("go", "", 8)
	p.CellFormat(g.right-g.left, 4, "correction (true minus indicated), mL; bars and band: expanded uncertainty U", "", 0, "C", false, 0, "")
}

func (p *pdfPage) label(g plot, correctionML float64, text string) {
	p.SetFont("go", "", 7.5)
	p.SetXY(g.x(correctionML)-20, g.top+g.height+1)
	p.CellFormat(40, 4, text, "", 0, "C", false, 0, "")
}

func (p *pdfPage) curve(m Material, g plot) {
	p.SetDrawColor(29, 79, 104)
	p.SetFillColor(29, 79, 104)
	x, y := g.x(0), g.y(m.Curve.FirstML)
	for _, point := range m.Curve.Points {
		nextX, nextY := g.x(point.CorrectionML), g.y(point.ReadingML)
		p.SetLineWidth(0.5)
		p.Line(x, y, nextX, nextY)
		x, y = nextX, nextY
	}
	for _, point := range m.Curve.Points {
		at := g.y(point.ReadingML)
		low, high := g.x(point.CorrectionML-point.ExpandedML), g.x(point.CorrectionML+point.ExpandedML)
		p.SetLineWidth(0.25)
		p.Line(low, at, high, at)
		p.Line(low, at-1, low, at+1)
		p.Line(high, at-1, high, at+1)
		p.Circle(g.x(point.CorrectionML), at, 0.9, "F")
		p.SetLineWidth(0.08)
		p.SetDashPattern([]float64{0.5, 0.8}, 0)
		p.Line(pageMargin+14+tubeMM, at, low, at)
		p.SetDashPattern(nil, 0)
	}
	p.SetDrawColor(20, 26, 30)
	p.SetLineWidth(0.2)
}
