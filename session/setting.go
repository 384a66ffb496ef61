package session

import "tenthmark/calc"

// Setting is what the laboratory has laid down before a run begins. It is copied
// into the run's first event, so that a later change of the configuration cannot
// change what was done.
type Setting struct {
	Inputs      calc.Inputs `json:"inputs"`
	Standard    string      `json:"standard,omitempty"` // whose limits apply, if not the burette's own
	Rule        string      `json:"rule"`               // decision rule: simple, guarded or non-binary
	Method      string      `json:"method,omitempty"`
	Laboratory  Laboratory  `json:"laboratory"`
	Equipment   []Equipment `json:"equipment,omitempty"`
	CheckWeight string      `json:"check_weight,omitempty"` // the log that has to be within its tolerance on the same day
	SignIn      bool        `json:"sign_in"`                // whether people sign in with a secret
	Review      bool        `json:"review"`                 // whether another person has to review before publication
	Software    string      `json:"software"`
}

// Laboratory is who issues the certificate.
type Laboratory struct {
	Name          string   `json:"name,omitempty" toml:"name"`
	Address       []string `json:"address,omitempty" toml:"address"`
	Place         string   `json:"place,omitempty" toml:"place"`     // where the work is done
	Country       string   `json:"country,omitempty" toml:"country"` // ISO 3166-1, two letters
	Contact       string   `json:"contact,omitempty" toml:"contact"`
	Accreditation string   `json:"accreditation,omitempty" toml:"accreditation"`
	Logo          string   `json:"logo,omitempty" toml:"logo"` // path of a PNG
}

// Equipment is one instrument that the result rests on, with its own certificate.
type Equipment struct {
	Kind         string `json:"kind" toml:"kind"` // balance, thermometer, barometer, hygrometer, weights
	Name         string `json:"name" toml:"name"`
	Serial       string `json:"serial,omitempty" toml:"serial"`
	Certificate  string `json:"certificate,omitempty" toml:"certificate"`
	Issuer       string `json:"issuer,omitempty" toml:"issuer"`
	CalibratedOn string `json:"calibrated_on,omitempty" toml:"calibrated_on"`
	ValidUntil   string `json:"valid_until,omitempty" toml:"valid_until"`
	SHA256       string `json:"sha256,omitempty" toml:"sha256"` // of the certificate's file
}
