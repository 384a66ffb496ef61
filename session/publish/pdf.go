package publish

import (
	"bytes"
	"fmt"
	"math"
	"strings"

	"codeberg.org/go-pdf/fpdf"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/gomono"
	"golang.org/x/image/font/gofont/goregular"
	"rsc.io/qr"
)

// Measures of the page in mm.
const (
	pageMargin  = 18.0
	lineHeight  = 4.6
	smallHeight = 4.0
	labelWidth  = 52.0
)

// pdfPage lays the certificate out on paper.
type pdfPage struct {
	*fpdf.Fpdf
	c     *certificate
	width float64 // between the margins
}

func certificatePDF(m Material) ([]byte, error) {
	c, err := newCertificate(m)
	if err != nil {
		return nil, err
	}
	p := newPDFPage(m, c)
	p.AddPage()
	p.heading(m)
	for _, s := range c.Sections {
		if err := p.section(m, s); err != nil {
			return nil, err
		}
	}
	if err := p.checkpoint(); err != nil {
		return nil, err
	}
	p.SetFont("go", "B", 9)
	p.Ln(3)
	p.CellFormat(0, lineHeight, "End of the "+strings.ToLower(c.Title)+" "+c.Number, "", 1, "C", false, 0, "")
	var out bytes.Buffer
	if err := p.Output(&out); err != nil {
		return nil, fmt.Errorf("lay out: %w", err)
	}
	return out.Bytes(), nil
}

func newPDFPage(m Material, c *certificate) *pdfPage {
	paper := m.Paper
	if paper == "" {
		paper = "A4"
	}
	p := &pdfPage{Fpdf: fpdf.New("P", "mm", paper, ""), c: c}
	w, _ := p.GetPageSize()
	p.width = w - 2*pageMargin
	p.SetMargins(pageMargin, 16, pageMargin)
	p.SetAutoPageBreak(true, 20)
	p.AddUTF8FontFromBytes("go", "", goregular.TTF)
	p.AddUTF8FontFromBytes("go", "B", gobold.TTF)
	p.AddUTF8FontFromBytes("mono", "", gomono.TTF)
	made := m.Document.Run.Finished.Time
	p.SetCreationDate(made)
	p.SetModificationDate(made)
	p.SetCatalogSort(true)
	p.SetTitle(c.Title+" "+c.Number, true)
	p.SetAuthor(m.Document.Setting.Laboratory.Name, true)
	p.SetCreator(m.Document.Setting.Software, true)
	p.SetLang("en")
	p.AliasNbPages("{pages}")
	p.SetFooterFunc(func() {
		p.SetY(-14)
		p.SetFont("go", "", 8)
		p.SetTextColor(90, 100, 106)
		p.CellFormat(p.width/2, 4, c.Title+" "+c.Number, "T", 0, "L", false, 0, "")
		p.CellFormat(p.width/2, 4, fmt.Sprintf("page %d of {pages}", p.PageNo()), "T", 0, "R", false, 0, "")
		p.SetTextColor(20, 26, 30)
	})
	return p
}

// heading: who issues what for which item.
func (p *pdfPage) heading(m Material) {
	if len(m.Logo) > 0 {
		p.RegisterImageOptionsReader("logo", fpdf.ImageOptions{ImageType: "PNG"}, bytes.NewReader(m.Logo))
		p.ImageOptions("logo", pageMargin+p.width-28, 14, 28, 0, false, fpdf.ImageOptions{ImageType: "PNG"}, 0, "")
	}
	p.SetTextColor(20, 26, 30)
	p.SetFont("go", "B", 10)
	p.CellFormat(0, 5, p.c.Laboratory[0], "", 1, "L", false, 0, "")
	p.SetFont("go", "", 8.5)
	p.CellFormat(0, smallHeight, strings.Join(p.c.Laboratory[1:], " · "), "", 1, "L", false, 0, "")
	p.Ln(7)
	p.SetFont("go", "B", 21)
	p.CellFormat(0, 9, p.c.Title, "", 1, "L", false, 0, "")
	p.SetFont("go", "", 11)
	p.CellFormat(p.width*0.6, 6, "No. "+p.c.Number, "", 0, "L", false, 0, "")
	p.CellFormat(p.width*0.4, 6, "issued "+p.c.Issued, "", 1, "R", false, 0, "")
	if p.c.Superseded != "" {
		p.SetFont("go", "B", 10)
		p.CellFormat(0, 6, p.c.Superseded, "", 1, "L", false, 0, "")
	}
	p.SetDrawColor(20, 26, 30)
	p.SetLineWidth(0.5)
	p.Line(pageMargin, p.GetY()+1, pageMargin+p.width, p.GetY()+1)
	p.SetLineWidth(0.2)
	p.Ln(2)
}

// section writes one section; it begins on a new page when too little of it would
// stand on this one.
func (p *pdfPage) section(m Material, s section) error {
	need := 22.0
	if s.Drawing {
		need = drawingHeightMM + 14
	} else if len(s.Rows) > 0 {
		need = math.Min(40, 20+float64(len(s.Rows))*5)
	}
	p.room(need)
	p.Ln(3.5)
	p.SetFont("go", "B", 10.5)
	p.SetTextColor(29, 79, 104)
	p.CellFormat(0, 6, s.Heading, "", 1, "L", false, 0, "")
	p.SetTextColor(20, 26, 30)
	for _, pair := range s.Pairs {
		p.pair(pair[0], pair[1])
	}
	p.table(s)
	if s.Drawing {
		if err := p.drawing(m); err != nil {
			return err
		}
	}
	p.SetFont("go", "", 9)
	for _, note := range s.Notes {
		p.Ln(0.8)
		p.MultiCell(0, smallHeight+0.2, note, "", "L", false)
	}
	return nil
}

// room breaks the page when less than need mm are left.
func (p *pdfPage) room(need float64) {
	_, height := p.GetPageSize()
	if p.GetY()+need > height-20 {
		p.AddPage()
	}
}

func (p *pdfPage) pair(label, value string) {
	p.SetFont("go", "", 9)
	y := p.GetY()
	p.SetTextColor(90, 100, 106)
	p.MultiCell(labelWidth, lineHeight, label, "", "L", false)
	after := p.GetY()
	p.SetTextColor(20, 26, 30)
	p.SetXY(pageMargin+labelWidth, y)
	p.MultiCell(p.width-labelWidth, lineHeight, value, "", "L", false)
	p.SetY(math.Max(after, p.GetY()))
}

// table writes rows whose cells may take several lines.
func (p *pdfPage) table(s section) {
	if len(s.Rows) == 0 {
		return
	}
	sum := 0.0
	for _, w := range s.Widths {
		sum += w
	}
	widths := make([]float64, len(s.Widths))
	for i, w := range s.Widths {
		widths[i] = w / sum * p.width
	}
	p.SetFont("go", "B", 8.5)
	p.row(s.Header, widths, isNumeric(s.Rows[0]), "B")
	p.SetFont("go", "", 9)
	for _, cells := range s.Rows {
		p.row(cells, widths, isNumeric(cells), "")
	}
	p.Line(pageMargin, p.GetY(), pageMargin+p.width, p.GetY())
	p.Ln(1.2)
}

// isNumeric: rows of numbers are set to the right, under one another.
func isNumeric(cells []string) bool {
	return len(cells) > 0 && strings.IndexFunc(cells[0], func(r rune) bool { return r < '0' || r > '9' }) < 0
}

func (p *pdfPage) row(cells []string, widths []float64, right bool, border string) {
	lines, most := make([][]string, len(cells)), 1
	for i, cell := range cells {
		lines[i] = p.SplitText(cell, widths[i]-2)
		most = max(most, len(lines[i]))
	}
	p.room(float64(most)*smallHeight + 1)
	y, x := p.GetY(), pageMargin
	align := "L"
	if right {
		align = "R"
	}
	for i := range cells {
		for n, text := range lines[i] {
			p.SetXY(x, y+float64(n)*smallHeight+0.4)
			p.CellFormat(widths[i]-2, smallHeight, text, "", 0, align, false, 0, "")
		}
		x += widths[i]
	}
	p.SetXY(pageMargin, y+float64(most)*smallHeight+0.8)
	if border != "" {
		p.Line(pageMargin, p.GetY(), pageMargin+p.width, p.GetY())
	}
}

// checkpoint prints the ledger's signed checkpoint as text and as a QR code.
func (p *pdfPage) checkpoint() error {
	if p.c.Checkpoint == "" {
		return nil
	}
	code, err := qr.Encode(p.c.Checkpoint, qr.M)
	if err != nil {
		return fmt.Errorf("QR code: %w", err)
	}
	const side = 34.0
	p.room(side + 12)
	p.Ln(3.5)
	p.SetFont("go", "B", 10.5)
	p.SetTextColor(29, 79, 104)
	p.CellFormat(0, 6, "Ledger checkpoint", "", 1, "L", false, 0, "")
	p.SetTextColor(20, 26, 30)
	y := p.GetY()
	p.SetFillColor(0, 0, 0)
	p.Ln(1)
	y += 1
	step := side / float64(code.Size)
	for row := range code.Size {
		for col := range code.Size {
			if code.Black(col, row) {
				p.Rect(pageMargin+float64(col)*step, y+float64(row)*step, step*1.02, step*1.02, "F")
			}
		}
	}
	p.SetXY(pageMargin+side+6, y)
	p.SetFont("go", "", 9)
	p.MultiCell(p.width-side-6, smallHeight, "The signed state of the ledger when this document was made. With the public key, the files events.jsonl and proof.json beside this document show that the run stands in that ledger unaltered.", "", "L", false)
	p.SetFont("mono", "", 6.6)
	for _, line := range strings.Split(strings.TrimSpace(p.c.Checkpoint), "\n") {
		p.SetX(pageMargin + side + 6)
		p.MultiCell(p.width-side-6, 3.2, line, "", "L", false)
	}
	p.SetXY(pageMargin, math.Max(p.GetY(), y+side+1))
	return nil
}
