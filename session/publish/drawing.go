package publish

import (
	"fmt"
	"math"
	"strings"
)

// The drawing: the burette upright to scale, and beside it, on the same vertical
// scale, the correction growing sideways with its uncertainty and the class limits.
const (
	drawWidth, drawHeight = 640.0, 760.0
	tubeX, tubeWidth      = 96.0, 34.0
	scaleTop, scaleBottom = 60.0, 690.0
	curveLeft, curveRight = 200.0, 610.0
)

type drawing struct {
	strings.Builder
	capacityML, limitML, spreadML float64
}

func (d *drawing) put(format string, args ...any) { fmt.Fprintf(d, format+"\n", args...) }

// y gives the height at which a reading stands: zero on top, as on the glass.
func (d *drawing) y(readingML float64) float64 {
	return scaleTop + readingML/d.capacityML*(scaleBottom-scaleTop)
}

// x gives where a correction stands: zero in the middle.
func (d *drawing) x(correctionML float64) float64 {
	middle := (curveLeft + curveRight) / 2
	return middle + correctionML/d.spreadML*(curveRight-curveLeft)/2
}

func curveSVG(m Material) ([]byte, error) {
	b := m.Document.Run.Burette
	d := &drawing{capacityML: b.CapacityML.Float()}
	if c := m.Document.Conformity; c != nil {
		d.limitML = c.MPEML
	}
	for _, p := range m.Curve.Points {
		d.spreadML = max(d.spreadML, (math.Abs(p.CorrectionML)+p.ExpandedML)*1.15)
	}
	d.spreadML = max(d.spreadML, d.limitML*1.25)
	d.put(`<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %g %g" font-family="sans-serif" font-size="12" fill="#1b2a33">`, drawWidth, drawHeight)
	d.put(`<title>Burette %s, run %s: correction along the scale</title>`, b.Name, m.Document.Run.ID)
	d.put(`<rect width="%g" height="%g" fill="#fff"/>`, drawWidth, drawHeight)
	d.put(`<text x="16" y="24" font-size="15" font-weight="bold">%s · %s mL · class %s</text>`, b.Name, b.CapacityML, b.Class)
	d.put(`<text x="%g" y="24" text-anchor="end">run %s</text>`, drawWidth-16, m.Document.Run.ID)
	d.tube(b.SubdivisionML.Float())
	d.axes()
	if err := d.curve(m); err != nil {
		return nil, err
	}
	d.legend()
	d.put(`</svg>`)
	return []byte(d.String()), nil
}

// tube draws the glass with its lines: every tenth long and numbered.
func (d *drawing) tube(subdivisionML float64) {
	d.put(`<path d="M%g %g V%g Q%g %g %g %g Q%g %g %g %g V%g Z" fill="#eef5f8" stroke="#45606e"/>`,
		tubeX, scaleTop-16, scaleBottom, tubeX, scaleBottom+18, tubeX+tubeWidth/2, scaleBottom+24,
		tubeX+tubeWidth, scaleBottom+18, tubeX+tubeWidth, scaleBottom, scaleTop-16)
	lines := int(math.Round(d.capacityML / subdivisionML))
	for i := 0; i <= lines; i++ {
		v := float64(i) * subdivisionML
		length, width := 0.3, 0.4
		switch {
		case i%10 == 0:
			length, width = 1, 0.9
		case i%5 == 0:
			length = 0.55
		}
		d.put(`<path d="M%g %.2f h%.2f" stroke="#45606e" stroke-width="%g"/>`, tubeX, d.y(v), tubeWidth*length, width)
		if i%50 == 0 {
			d.put(`<text x="%g" y="%.2f" text-anchor="end">%g</text>`, tubeX-8, d.y(v)+4, v)
		}
	}
	d.put(`<text x="%g" y="%g" text-anchor="end">mL</text>`, tubeX-8, scaleTop-14)
}

// axes draws zero and the class limits.
func (d *drawing) axes() {
	d.put(`<path d="M%.2f %g V%g" stroke="#1b2a33"/>`, d.x(0), scaleTop, scaleBottom)
	d.put(`<text x="%.2f" y="%g" text-anchor="middle">0</text>`, d.x(0), scaleBottom+18)
	for _, limit := range []float64{-d.limitML, d.limitML} {
		if limit == 0 {
			continue
		}
		d.put(`<path d="M%.2f %g V%g" stroke="#8a3b12" stroke-dasharray="7 4"/>`, d.x(limit), scaleTop, scaleBottom)
		d.put(`<text x="%.2f" y="%g" text-anchor="middle" fill="#8a3b12">%+g</text>`, d.x(limit), scaleBottom+18, limit)
	}
	d.put(`<text x="%.2f" y="%g" text-anchor="middle">correction (true minus indicated), mL</text>`, d.x(0), scaleBottom+36)
}

// drawnSteps is how finely the uncertainty between the points is drawn.
const drawnSteps = 100

func (d *drawing) curve(m Material) error {
	first, last := m.Curve.FirstML, m.Curve.Points[len(m.Curve.Points)-1].ReadingML
	var low, high []string
	for i := 0; i <= drawnSteps; i++ {
		v := first + (last-first)*float64(i)/drawnSteps
		p, err := m.Curve.At(v)
		if err != nil {
			return err
		}
		low = append(low, fmt.Sprintf("%.2f,%.2f", d.x(p.CorrectionML-p.ExpandedML), d.y(v)))
		high = append([]string{fmt.Sprintf("%.2f,%.2f", d.x(p.CorrectionML+p.ExpandedML), d.y(v))}, high...)
	}
	d.put(`<polygon points="%s %s" fill="#d3e4ec"/>`, strings.Join(low, " "), strings.Join(high, " "))
	path := fmt.Sprintf("M%.2f %.2f", d.x(0), d.y(first))
	for _, p := range m.Curve.Points {
		path += fmt.Sprintf(" L%.2f %.2f", d.x(p.CorrectionML), d.y(p.ReadingML))
	}
	d.put(`<path d="%s" fill="none" stroke="#1d4f68" stroke-width="2"/>`, path)
	for _, p := range m.Curve.Points {
		d.put(`<path d="M%g %.2f H%.2f" stroke="#45606e" stroke-width="0.4" stroke-dasharray="2 3"/>`, tubeX+tubeWidth, d.y(p.ReadingML), d.x(p.CorrectionML-p.ExpandedML))
		d.put(`<path d="M%.2f %.2f H%.2f m0 -4 v8 M%.2f %.2f v8" stroke="#1d4f68"/>`, d.x(p.CorrectionML-p.ExpandedML), d.y(p.ReadingML), d.x(p.CorrectionML+p.ExpandedML), d.x(p.CorrectionML-p.ExpandedML), d.y(p.ReadingML)-4)
		d.put(`<circle cx="%.2f" cy="%.2f" r="3.6" fill="#1d4f68"/>`, d.x(p.CorrectionML), d.y(p.ReadingML))
	}
	return nil
}

func (d *drawing) legend() {
	y := drawHeight - 12.0
	d.put(`<g font-size="11"><circle cx="206" cy="%g" r="3.6" fill="#1d4f68"/><text x="216" y="%g">correction at a test point</text>`, y-4, y)
	d.put(`<rect x="366" y="%g" width="16" height="9" fill="#d3e4ec"/><text x="388" y="%g">expanded uncertainty U</text>`, y-9, y)
	d.put(`<path d="M522 %g h22" stroke="#8a3b12" stroke-dasharray="7 4"/><text x="550" y="%g">class limit</text></g>`, y-4, y)
}
