package calc

import (
	"fmt"
	"strings"
)

// Expansion is the cubic thermal expansion of a vessel's material.
type Expansion struct {
	Material string  `json:"material"`
	PerC     float64 `json:"expansion_per_C"` // 1/°C
	URel     float64 `json:"u_expansion_rel"` // relative standard uncertainty
	Source   string  `json:"source"`
	Doubtful bool    `json:"doubtful"` // ask for the maker's value
}

// ±10 % as limits of a rectangular distribution is customary for glass (a JJG
// evaluation uses ±2.5e-6 of 25e-6): 0.1/√3.
const glassURel = 0.058

var expansions = map[string]Expansion{
	"borosilicate-3.3":  {PerC: 9.9e-6, URel: 0.05, Source: "three times the linear 3.3e-6 that defines the glass (ISO 3585)"},
	"borosilicate-5.0":  {PerC: 15e-6, URel: glassURel, Source: "three times the linear 5.0e-6; ISO 4787 from memory"},
	"borosilicate-e542": {PerC: 10e-6, URel: glassURel, Source: "ASTM E542 from memory; evaluations by JJG 196 use it"},
	"soda-lime":         {PerC: 27e-6, URel: glassURel, Source: "ISO 4787 from memory; a glass maker's linear 9.1e-6 gives 27.3e-6"},
	"soda-lime-e542":    {PerC: 25e-6, URel: glassURel, Source: "ASTM E542 from memory; evaluations by JJG 196 use it"},
	"fused-silica":      {PerC: 1.6e-6, URel: 0.15, Source: "from memory; a table of physics gives 1.2e-6", Doubtful: true},
	"polypropylene":     {PerC: 345e-6, URel: 0.18, Source: "three times the linear 80e-6 to 150e-6, from memory", Doubtful: true},
	"polymethylpentene": {PerC: 350e-6, URel: 0.12, Source: "from memory", Doubtful: true},
	"polycarbonate":     {PerC: 200e-6, URel: 0.12, Source: "from memory", Doubtful: true},
	"stainless-steel":   {PerC: 50e-6, URel: 0.04, Source: "grades 304 and 316, 48e-6 to 52e-6, from memory", Doubtful: true},
	"ptfe":              {PerC: 350e-6, URel: 0.12, Source: "300e-6 to 400e-6, from memory", Doubtful: true},
}

// Materials gives the names that MaterialExpansion knows, sorted.
func Materials() []string { return sortedNames(expansions) }

// MaterialExpansion gives the cubic expansion of a material with its source. Plastics
// differ so much between makes that their values are marked doubtful.
func MaterialExpansion(material string) (Expansion, error) {
	e, ok := expansions[material]
	if !ok {
		return Expansion{}, fmt.Errorf("the material %q is none of %s", material, strings.Join(Materials(), ", "))
	}
	e.Material = material
	return e, nil
}

// ExpansionPerC gives the cubic expansion coefficient of a material by name, 1/°C.
func ExpansionPerC(material string) (float64, error) {
	e, err := MaterialExpansion(material)
	return e.PerC, err
}
