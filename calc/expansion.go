package calc

import (
	"fmt"
	"sort"
	"strings"
)

// expansions is the cubic expansion of burette glasses, 1/°C. Borosilicate glass 3.3
// is defined by its linear expansion, 3.3e-6 (ISO 3585); three times that is 9.9e-6.
// Borosilicate 5.0 and soda-lime are from memory of ISO 4787 (linear 9.1e-6 for
// soda-lime in a glass maker's table gives 27.3e-6); fused silica from memory.
var expansions = map[string]float64{
	"borosilicate-3.3": 9.9e-6,
	"borosilicate-5.0": 15e-6,
	"soda-lime":        27e-6,
	"fused-silica":     1.6e-6,
}

// ExpansionPerC gives the cubic expansion coefficient of a glass by name, 1/°C.
func ExpansionPerC(material string) (float64, error) {
	if e, ok := expansions[material]; ok {
		return e, nil
	}
	names := make([]string, 0, len(expansions))
	for name := range expansions {
		names = append(names, name)
	}
	sort.Strings(names)
	return 0, fmt.Errorf("the glass %q is none of %s", material, strings.Join(names, ", "))
}
