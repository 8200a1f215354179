// Package finding holds what an analysis says: a number with its unit,
// uncertainty and method, and a curve for the figures. It imports nothing of
// ours and may be used anywhere. All values are SI; Display turns them into the
// units that people read.
package finding

// Finding is one number that a clip gave.
type Finding struct {
	Key     string  `json:"key"`               // stable, for machines: "decay.period_zero"
	Subject string  `json:"subject,omitempty"` // the bob, part, magnet or pair that it is about
	Name    string  `json:"name"`              // plain words: "Period of small swings"
	Value   float64 `json:"value"`
	Unit    string  `json:"unit"` // SI: "s", "1", "A·m²"
	U       float64 `json:"u"`    // standard uncertainty
	Lo      float64 `json:"lo"`   // 95 % interval
	Hi      float64 `json:"hi"`
	// Kind says what sort of statement this is. The zero value is a measured number.
	Kind     Kind     `json:"kind,omitempty"`
	Text     string   `json:"text,omitempty"`     // for a Statement: what is found, in plain words
	Method   string   `json:"method"`             // one line on how it was obtained
	Cautions []string `json:"cautions,omitempty"` // one plain sentence each
	Evidence []string `json:"evidence,omitempty"` // what a Statement rests on, one plain sentence each
	Budget   []Share  `json:"budget,omitempty"`   // what U is made of, in the finding's unit
}

// Kind is the sort of statement a finding makes.
type Kind string

// The kinds of finding.
const (
	Measured   Kind = ""            // value, uncertainty and interval hold
	UpperLimit Kind = "upper limit" // only Hi holds (95 %): nothing was seen above it
	Undecided  Kind = "undecided"   // the clip does not determine it; Text says why and what would
	Statement  Kind = "statement"   // words, not a number: Text
)

// Share is one source's contribution to a standard uncertainty.
type Share struct {
	Source string  `json:"source"`
	U      float64 `json:"u"`
}

// Normal returns a measured finding whose 95 % interval is that of a normal
// distribution, value ± 1.96 u.
func Normal(key, subject, name string, value, u float64, unit, method string) Finding {
	const z = 1.959963984540054 // 97.5 % point of the normal distribution
	return Finding{
		Key: key, Subject: subject, Name: name, Value: value, U: u, Unit: unit,
		Lo: value - z*u, Hi: value + z*u, Method: method,
	}
}

// Line is one line, band or cloud of a curve. Lo and Hi, when not nil, are a
// band's edges and have the length of X. Gaps are NaN.
type Line struct {
	Name string    `json:"name"`
	Role Role      `json:"role"`
	X    []float64 `json:"x"`
	Y    []float64 `json:"y"`
	Lo   []float64 `json:"lo,omitempty"`
	Hi   []float64 `json:"hi,omitempty"`
}

// Role says how a line is meant, so that figures can draw it.
type Role string

// The roles of a line.
const (
	Data     Role = "data"     // measured samples
	Model    Role = "model"    // a fitted or simulated curve
	Residual Role = "residual" // data minus model
	Guide    Role = "guide"    // a limit, a threshold, a zero line
	Mark     Role = "mark"     // single events: peaks, passes
)

// Axis is a curve's axis. Values in the lines are in Unit (SI); ShowUnit and
// ShowFactor say what a figure prints: shown = value × ShowFactor.
type Axis struct {
	Label      string  `json:"label"`
	Unit       string  `json:"unit"`
	ShowUnit   string  `json:"show_unit,omitempty"`
	ShowFactor float64 `json:"show_factor,omitempty"` // 0 means 1
	Log        bool    `json:"log,omitempty"`
}

// Curve is what one figure, or one panel of a figure, draws.
type Curve struct {
	Key     string `json:"key"` // stable, names the file in curves/
	Subject string `json:"subject,omitempty"`
	Title   string `json:"title"`
	Caption string `json:"caption"` // for a stranger: what is seen, with its uncertainty
	X       Axis   `json:"x"`
	Y       Axis   `json:"y"`
	Lines   []Line `json:"lines"`
	// Grid, when not nil, is a picture of cells behind the lines: a recurrence
	// plot, a spectrogram.
	Grid *Grid `json:"grid,omitempty"`
}

// Grid is a picture of cells. X and Y hold the cells' middles in the curve's
// units, evenly spaced; Z holds len(Y) rows of len(X) values, NaN where there is
// none. Label says what Z is.
type Grid struct {
	X     []float64 `json:"x"`
	Y     []float64 `json:"y"`
	Z     []float64 `json:"z"`
	Label string    `json:"label"`
	Unit  string    `json:"unit"`
	Log   bool      `json:"log,omitempty"` // Z is best shown by its logarithm
}

// Fit is the summary of one fit: what was free, what was held, what the data
// could not separate.
type Fit struct {
	Key          string      `json:"key"`
	Subject      string      `json:"subject,omitempty"`
	Free         []Parameter `json:"free"`
	Held         []Parameter `json:"held,omitempty"`
	NotSeparable []string    `json:"not_separable,omitempty"` // plain words, one per combination
	Correlation  [][]float64 `json:"correlation,omitempty"`   // of Free, in order
	ChiSquare    float64     `json:"chi_square"`
	DegreesOf    int         `json:"degrees_of_freedom"`
	Converged    bool        `json:"converged"`
	Why          string      `json:"why"` // why it stopped, plain words
	Candidates   []Candidate `json:"candidates,omitempty"`
	Verdicts     []Verdict   `json:"verdicts,omitempty"` // on each number that was asked for
}

// Verdict says in plain words whether the data determine a number that was asked
// for, what limits it, and what would tell more.
type Verdict struct {
	Name string `json:"name"`
	Told string `json:"told"` // "determined to ±0.6 %", "not determined"
	Why  string `json:"why,omitempty"`
	Help string `json:"help,omitempty"`
}

// Parameter is one parameter of a fit.
type Parameter struct {
	Name  string  `json:"name"`
	Value float64 `json:"value"`
	U     float64 `json:"u"`
	Unit  string  `json:"unit"`
}

// Candidate is one law that was weighed against others.
type Candidate struct {
	Name   string  `json:"name"`
	BIC    float64 `json:"bic"`
	Weight float64 `json:"weight"` // exp(−ΔBIC/2), normalised over the candidates
}
