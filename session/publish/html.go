package publish

import (
	"bytes"
	_ "embed"
	"html/template"
)

//go:embed certificate.html.tmpl
var htmlText string

var htmlTemplate = template.Must(template.New("certificate").Parse(htmlText))

// certificateHTML is the certificate as one page that needs nothing else.
func certificateHTML(m Material) ([]byte, error) {
	c, err := newCertificate(m)
	if err != nil {
		return nil, err
	}
	svg, err := curveSVG(m)
	if err != nil {
		return nil, err
	}
	var out bytes.Buffer
	err = htmlTemplate.Execute(&out, struct {
		*certificate
		Drawing template.HTML // our own drawing, made from checked names and numbers
	}{c, template.HTML(svg)})
	if err != nil {
		return nil, err
	}
	return out.Bytes(), nil
}
