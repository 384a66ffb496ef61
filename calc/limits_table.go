package calc

// standardLimits are the limits of one standard in one edition.
type standardLimits struct {
	name        string
	classes     []string
	rows        []limitRow // rising capacity
	status      LimitStatus
	nextSmaller bool           // a capacity not listed takes the limit of the next smaller one
	waitS       map[string]int // by class, s
	note        string
}

// limitRow is ± mL for one capacity and subdivision; subdivision 0: any.
type limitRow struct{ capacityML, subdivisionML, classAML, classBML float64 }

// standards are the limits known to the program. None of the standards' own texts
// was at hand; status says where the numbers are from. Class AS has the limits of
// class A and differs in its waiting time.
var standards = map[string]standardLimits{
	// Types without waiting time (A, B) and with 30 s (AS), clause 5. Limits as in a
	// public laboratory data set that names the edition.
	"ISO 385:2005": {
		classes: []string{"A", "AS", "B"}, status: LimitSecondhand, waitS: map[string]int{"AS": 30},
		rows: []limitRow{
			{1, 0.01, 0.006, 0.01},
			{2, 0.01, 0.01, 0.02},
			{5, 0.01, 0.01, 0.02},
			{5, 0.02, 0.01, 0.02},
			{10, 0.02, 0.02, 0.05},
			{10, 0.05, 0.03, 0.05},
			{25, 0.05, 0.03, 0.05},
			{25, 0.1, 0.05, 0.1},
			{50, 0.1, 0.05, 0.1},
			{100, 0.2, 0.1, 0.2},
		},
	},
	// Limits as quoted by a published procedure for burettes; the subdivisions of the
	// edition were not read, so that the limit goes by capacity alone.
	"JJG 196-2006": {
		classes: []string{"A", "B"}, status: LimitSecondhand, waitS: map[string]int{"A": 30, "B": 30},
		rows: []limitRow{
			{1, 0, 0.01, 0.02},
			{2, 0, 0.01, 0.02},
			{5, 0, 0.01, 0.02},
			{10, 0, 0.025, 0.05},
			{25, 0, 0.04, 0.08},
			{50, 0, 0.05, 0.1},
			{100, 0, 0.1, 0.2},
		},
	},
	// Class 2 of the standard is class B. Read in the type approval GRSI 26769-08.
	"GOST 29252-91": {
		classes: []string{"B"}, status: LimitRead, note: "the standard calls this class 2",
		rows: []limitRow{
			{1, 0, 0, 0.02},
			{2, 0, 0, 0.02},
			{5, 0, 0, 0.02},
			{10, 0, 0, 0.05},
			{25, 0, 0, 0.1},
			{50, 0, 0, 0.1},
			{100, 0, 0, 0.2},
		},
	},
	// Class A from memory. Read in the standard's scope: the sizes, class B is twice
	// class A, no after-drainage period, and the rule of the next smaller size (1.1.3).
	"ASTM E287-02": {
		classes: []string{"A", "B"}, status: LimitMemory, nextSmaller: true,
		note: "no after-drainage period",
		rows: []limitRow{
			{10, 0, 0.02, 0.04},
			{25, 0, 0.03, 0.06},
			{50, 0, 0.05, 0.1},
			{100, 0, 0.1, 0.2},
		},
	},
	// From memory. Read: a titrant volume of at least 30 % of the nominal capacity and
	// an outflow of at most 0.5 mL/s.
	"USP <31>": {
		classes: []string{"A"}, status: LimitMemory,
		note: "use at least 30 % of the nominal capacity; outflow at most 0.5 mL/s",
		rows: []limitRow{
			{10, 0, 0.02, 0},
			{25, 0, 0.03, 0},
			{50, 0, 0.05, 0},
		},
	},
}
