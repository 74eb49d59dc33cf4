// Package result holds the machine-readable outcome of an analysis, results.json
// format 1, with its reader and writer. Numbers keep full precision; what cannot be
// computed is null and a note says why.
package result

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strconv"
)

// Number is a float64 whose NaN and infinities are null in JSON.
type Number float64

// NaN is the number that is not there.
var NaN = Number(math.NaN())

// Known tells whether the number is there.
func (n Number) Known() bool { return !math.IsNaN(float64(n)) && !math.IsInf(float64(n), 0) }

// MarshalJSON writes the shortest text that reads back as the same float64.
func (n Number) MarshalJSON() ([]byte, error) {
	if !n.Known() {
		return []byte("null"), nil
	}
	return json.Marshal(float64(n))
}

// UnmarshalJSON reads a number or null.
func (n *Number) UnmarshalJSON(b []byte) error {
	if bytes.Equal(b, []byte("null")) {
		*n = NaN
		return nil
	}
	f, err := strconv.ParseFloat(string(b), 64)
	if err != nil {
		return fmt.Errorf("number %q: %w", b, err)
	}
	*n = Number(f)
	return nil
}

// Levels names a cell: factor and level in the protocol's order. In JSON it is an
// object whose keys keep that order.
type Levels []FactorLevel

// FactorLevel is one level of one factor.
type FactorLevel struct{ Factor, Level string }

// Of gives the level of a factor, or an empty string.
func (l Levels) Of(factor string) string {
	for _, x := range l {
		if x.Factor == factor {
			return x.Level
		}
	}
	return ""
}

// MarshalJSON writes an object in order.
func (l Levels) MarshalJSON() ([]byte, error) {
	var b bytes.Buffer
	b.WriteByte('{')
	for i, x := range l {
		if i > 0 {
			b.WriteByte(',')
		}
		k, err := encode(x.Factor)
		if err != nil {
			return nil, err
		}
		v, err := encode(x.Level)
		if err != nil {
			return nil, err
		}
		b.Write(k)
		b.WriteByte(':')
		b.Write(v)
	}
	b.WriteByte('}')
	return b.Bytes(), nil
}

// UnmarshalJSON reads an object keeping the order of its keys.
func (l *Levels) UnmarshalJSON(data []byte) error {
	d := json.NewDecoder(bytes.NewReader(data))
	if t, err := d.Token(); err != nil || t != json.Delim('{') {
		return fmt.Errorf("levels: an object is expected")
	}
	*l = Levels{}
	for d.More() {
		k, err := d.Token()
		if err != nil {
			return err
		}
		v, err := d.Token()
		if err != nil {
			return err
		}
		key, ok1 := k.(string)
		value, ok2 := v.(string)
		if !ok1 || !ok2 {
			return fmt.Errorf("levels: %v: a string is expected", k)
		}
		*l = append(*l, FactorLevel{Factor: key, Level: value})
	}
	_, err := d.Token()
	return err
}

func encode(s string) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(s); err != nil {
		return nil, err
	}
	return bytes.TrimRight(b.Bytes(), "\n"), nil
}

// Results is results.json.
type Results struct {
	Format     int         `json:"format"`
	Program    Program     `json:"program"`
	Trial      Trial       `json:"trial"`
	Inputs     []Input     `json:"inputs"`
	Design     Design      `json:"design"`
	SampleSize *SampleSize `json:"sample_size,omitempty"`
	Responses  []Response  `json:"responses"`
}

// Program names the program that wrote the results.
type Program struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// Trial identifies the trial; Status is planned, allotted, sealed or complete.
type Trial struct {
	Code   string `json:"code"`
	Title  string `json:"title"`
	Status string `json:"status"`
}

// Input is a file that was read.
type Input struct {
	Path   string `json:"path"`
	SHA256 string `json:"sha256"`
	Bytes  int    `json:"bytes"`
}

// Design is what the layout alone says.
type Design struct {
	Name       string    `json:"name"`
	Units      []Unit    `json:"units"`
	Treatments int       `json:"treatments"`
	Strata     []Stratum `json:"strata"`
	ErrorDF    ErrorDF   `json:"error_df"`
	Checks     []Check   `json:"checks"`
}

// Unit is a unit of the design.
type Unit struct {
	Name     string   `json:"name"`
	Count    int      `json:"count"`
	Receives []string `json:"receives,omitempty"`
	Carries  []string `json:"carries,omitempty"`
}

// Stratum is a stratum of the design.
type Stratum struct {
	Name string `json:"name"`
	DF   int    `json:"df"`
}

// ErrorDF is the error df of every treatment term, in the order of the terms. The df
// is null for a term that no stratum holds whole.
type ErrorDF []TermDF

// TermDF is a term with its error df; -1 is null.
type TermDF struct {
	Term string
	DF   int
}

// MarshalJSON writes an object in order.
func (e ErrorDF) MarshalJSON() ([]byte, error) {
	var b bytes.Buffer
	b.WriteByte('{')
	for i, x := range e {
		if i > 0 {
			b.WriteByte(',')
		}
		k, err := encode(x.Term)
		if err != nil {
			return nil, err
		}
		b.Write(k)
		b.WriteByte(':')
		if x.DF < 0 {
			b.WriteString("null")
		} else {
			b.WriteString(strconv.Itoa(x.DF))
		}
	}
	b.WriteByte('}')
	return b.Bytes(), nil
}

// UnmarshalJSON reads an object keeping the order of its keys.
func (e *ErrorDF) UnmarshalJSON(data []byte) error {
	d := json.NewDecoder(bytes.NewReader(data))
	if t, err := d.Token(); err != nil || t != json.Delim('{') {
		return fmt.Errorf("error_df: an object is expected")
	}
	*e = ErrorDF{}
	for d.More() {
		k, err := d.Token()
		if err != nil {
			return err
		}
		var v *float64
		if err := d.Decode(&v); err != nil {
			return err
		}
		df := -1
		if v != nil {
			df = int(*v)
		}
		*e = append(*e, TermDF{Term: k.(string), DF: df})
	}
	_, err := d.Token()
	return err
}

// Check is one thing that was looked at; Level is pass, note, warning or error.
type Check struct {
	Code  string `json:"code"`
	Level string `json:"level"`
	Text  string `json:"text"`
	Where string `json:"where,omitempty"`
	// Reason says why it is looked at, with its source.
	Reason string `json:"reason,omitempty"`
}

// SampleSize is the justification of the size as far as it was computed. Replicates, units,
// animals, error df and power are those of the plan as it stands; Power and Difference are
// of the term or contrast that the size was chosen for.
type SampleSize struct {
	Basis      string       `json:"basis"`
	Response   string       `json:"response,omitempty"`
	Replicates int          `json:"replicates"`
	Units      int          `json:"units"`
	Animals    int          `json:"animals,omitempty"`
	ErrorDF    *int         `json:"error_df"`
	Power      Number       `json:"power"`
	Difference Number       `json:"difference"`
	Curve      []PowerPoint `json:"curve"`

	Term     string `json:"term,omitempty"`
	Contrast string `json:"contrast,omitempty"`
	Unit     string `json:"unit,omitempty"` // the experimental unit
	// Method is "noncentral F", "noncentral t", "two one-sided t", "half width" or "error df".
	Method string `json:"method,omitempty"`
	Alpha  Number `json:"alpha"`
	Sides  int    `json:"sides,omitempty"`
	Wished Number `json:"wished_power"`
	Margin Number `json:"margin"`
	// Scale of difference, SD, margin and half width: "unit" of the response, "percent" of
	// the mean, "log" or, where no SD is stated, "sd".
	Scale      string `json:"scale,omitempty"`
	SD         Number `json:"sd"`         // of one experimental unit in the term's stratum
	Efficiency Number `json:"efficiency"` // of the layout for the term: 1 where nothing is lost
	Bound      bool   `json:"efficiency_is_bound,omitempty"`
	SED        Number `json:"sed"` // of the difference, or of the contrast
	// Detectable is the difference (for equivalence the margin) that reaches the wished power.
	Detectable Number `json:"detectable"`
	HalfWidth  Number `json:"half_width"`
	WishedHalf Number `json:"wished_half_width"`
	Attrition  Number `json:"attrition"`

	Grows        *Grows            `json:"grows"`  // what more replication means in this layout
	Needed       *Needed           `json:"needed"` // nil: not known, or not reached
	WithLosses   *Needed           `json:"needed_with_losses"`
	ErrorDFRule  *Needed           `json:"error_df_rule"` // smallest replication that leaves the wished error df
	ByDifference []DifferencePower `json:"by_difference"`
	BySD         []SDPower         `json:"by_sd"`
	Groups       []GroupPower      `json:"groups"`
	Terms        []TermPower       `json:"terms"`
	Notes        []Note            `json:"notes"`
}

// Grows names the unit whose number grows with replication and how many there are; Step
// is by how many it grows so that treatments stay as equally replicated as they are.
type Grows struct {
	Unit  string `json:"unit"`
	Count int    `json:"count"`
	Step  int    `json:"step"`
}

// Needed is a replication with what it means in units, and what it gives.
type Needed struct {
	Replicates int    `json:"replicates"`
	Count      int    `json:"count"` // of the unit that grows
	Units      int    `json:"units"`
	Animals    int    `json:"animals,omitempty"`
	ErrorDF    int    `json:"error_df"`
	Power      Number `json:"power"`
	HalfWidth  Number `json:"half_width"`
}

// DifferencePower is the power for a difference, in multiples of the stated one.
type DifferencePower struct {
	Difference Number `json:"difference"`
	Power      Number `json:"power"`
}

// SDPower is the power, and the replication that is needed, at another SD. Replicates is 0
// where the wished power is not reached.
type SDPower struct {
	SD         Number   `json:"sd"`
	Power      Number   `json:"power"`
	Replicates int      `json:"replicates"`
	Curve      []Number `json:"curve"` // the power at each point of the curve
}

// GroupPower is the power with other numbers of replicates and of animals in a unit.
type GroupPower struct {
	Replicates int    `json:"replicates"`
	PerUnit    Number `json:"animals_per_unit"` // null: as many as could ever be
	Animals    int    `json:"animals,omitempty"`
	SD         Number `json:"sd"`
	Power      Number `json:"power"`
	HalfWidth  Number `json:"half_width"`
}

// TermPower is what the plan gives for a treatment term. DetectableSD is in SDs of the
// term's experimental unit.
type TermPower struct {
	Term         string `json:"term"`
	Unit         string `json:"unit"`
	Replicates   int    `json:"replicates"`
	DF           int    `json:"df"`
	ErrorDF      *int   `json:"error_df"`
	SD           Number `json:"sd"`
	Efficiency   Number `json:"efficiency"`
	Detectable   Number `json:"detectable"`
	DetectableSD Number `json:"detectable_sd"`
}

// PowerPoint is a point of a power curve.
type PowerPoint struct {
	Replicates int    `json:"replicates"`
	ErrorDF    int    `json:"error_df"`
	Power      Number `json:"power"`
	Count      int    `json:"count,omitempty"` // of the unit that grows
	HalfWidth  Number `json:"half_width"`
}

// Response is the analysis of one response.
type Response struct {
	Name        string          `json:"name"`
	Label       string          `json:"label"`
	Unit        string          `json:"unit"`
	Role        string          `json:"role"`
	Kind        string          `json:"kind"`
	N           int             `json:"n"`
	Missing     int             `json:"missing"`
	Excluded    int             `json:"excluded"`
	Transform   string          `json:"transform"`
	Model       *Model          `json:"model"`
	Strata      []StratumResult `json:"strata"`
	Anova       []Line          `json:"anova"`
	Tests       []Test          `json:"tests"`
	Components  []Component     `json:"components"`
	Correlation *Correlation    `json:"correlation,omitempty"`
	Sphericity  *Sphericity     `json:"sphericity,omitempty"`
	GrandMean   Number          `json:"grand_mean"`
	CVPercent   Number          `json:"cv_percent"`
	Summary     []Summary       `json:"summary"`
	Covariates  []Covariate     `json:"covariates"`
	Means       []Mean          `json:"means"`
	SED         []SED           `json:"sed"`
	Comparisons []Comparison    `json:"comparisons"`
	Contrasts   []Contrast      `json:"contrasts"`
	Diagnostics []Diagnostic    `json:"diagnostics"`
	Residuals   []Residual      `json:"residuals"`
	Efficiency  []Efficiency    `json:"efficiency"`
	Planned     bool            `json:"planned"`
	Notes       []Note          `json:"notes"`
}

// Model says how a response was analysed. Method is strata or least squares.
type Model struct {
	Method        string   `json:"method"`
	Text          string   `json:"text"`
	Fixed         []string `json:"fixed"`
	Random        []string `json:"random"`
	Hypothesis    string   `json:"hypothesis"`
	DFMethod      string   `json:"df_method"`
	Converged     bool     `json:"converged"`
	LogLikelihood Number   `json:"log_likelihood"`
	AICc          Number   `json:"aicc"`
}

// StratumResult is a stratum that holds treatments.
type StratumResult struct {
	Name      string `json:"name"`
	CVPercent Number `json:"cv_percent"`
}

// Line is a line of the analysis of variance. Stratum is nil in a single least-squares
// table; ErrorDF is nil where there is no test.
type Line struct {
	Stratum *string `json:"stratum"`
	Source  string  `json:"source"`
	DF      int     `json:"df"`
	SS      Number  `json:"ss"`
	MS      Number  `json:"ms"`
	F       Number  `json:"f"`
	P       Number  `json:"p"`
	ErrorDF *Number `json:"error_df,omitempty"`
}

// Test is the test of a term; it is what a reader should use.
type Test struct {
	Source  string `json:"source"`
	DF      int    `json:"df"`
	ErrorDF Number `json:"error_df"`
	F       Number `json:"f"`
	P       Number `json:"p"`
	Planned bool   `json:"planned"`
	// P with the df of a split plot in time corrected for unequal correlation; 0: not asked.
	GreenhouseGeisser Number `json:"p_greenhouse_geisser,omitempty"`
	HuynhFeldt        Number `json:"p_huynh_feldt,omitempty"`
}

// Component is a component of variance.
type Component struct {
	Term     string `json:"term"`
	Estimate Number `json:"estimate"`
	SE       Number `json:"se"`
	Boundary bool   `json:"boundary"`
	// Limits, if the protocol asks for those by the profile likelihood.
	Lower *Number `json:"lower,omitempty"`
	Upper *Number `json:"upper,omitempty"`
}

// Correlation is the structure of repeated records.
type Correlation struct {
	Kind       string      `json:"kind"`
	Parameters Parameters  `json:"parameters"`
	Candidates []Candidate `json:"candidates"`
}

// Candidate is a structure that was tried. What did not converge has no numbers.
type Candidate struct {
	Kind          string `json:"kind"`
	LogLikelihood Number `json:"log_likelihood"`
	Parameters    int    `json:"parameters"`
	AICc          Number `json:"aicc"`
}

// Parameters are named numbers in order.
type Parameters []Parameter

// Parameter is a named number.
type Parameter struct {
	Name  string
	Value Number
}

// MarshalJSON writes an object in order.
func (p Parameters) MarshalJSON() ([]byte, error) {
	var b bytes.Buffer
	b.WriteByte('{')
	for i, x := range p {
		if i > 0 {
			b.WriteByte(',')
		}
		k, err := encode(x.Name)
		if err != nil {
			return nil, err
		}
		v, err := x.Value.MarshalJSON()
		if err != nil {
			return nil, err
		}
		b.Write(k)
		b.WriteByte(':')
		b.Write(v)
	}
	b.WriteByte('}')
	return b.Bytes(), nil
}

// UnmarshalJSON reads an object, keeping its order.
func (p *Parameters) UnmarshalJSON(data []byte) error {
	d := json.NewDecoder(bytes.NewReader(data))
	if _, err := d.Token(); err != nil {
		return err
	}
	*p = Parameters{}
	for d.More() {
		k, err := d.Token()
		if err != nil {
			return err
		}
		name, ok := k.(string)
		if !ok {
			return fmt.Errorf("parameters are no object")
		}
		x := Parameter{Name: name}
		if err := d.Decode(&x.Value); err != nil {
			return err
		}
		*p = append(*p, x)
	}
	return nil
}

// Sphericity says how far repeated records are from what a split plot in time supposes.
type Sphericity struct {
	W                 Number `json:"w"`
	ChiSquared        Number `json:"chi_squared"`
	DF                int    `json:"df"`
	P                 Number `json:"p"`
	GreenhouseGeisser Number `json:"greenhouse_geisser"`
	HuynhFeldt        Number `json:"huynh_feldt"`
}

// Summary describes the values of experimental units in one cell.
type Summary struct {
	Levels Levels `json:"levels"`
	N      int    `json:"n"`
	Units  int    `json:"units"`
	Mean   Number `json:"mean"`
	SD     Number `json:"sd"`
	Min    Number `json:"min"`
	Max    Number `json:"max"`
}

// Covariate is an adjustment.
type Covariate struct {
	Name         string `json:"name"`
	Slope        Number `json:"slope"`
	SE           Number `json:"se"`
	DF           Number `json:"df"`
	P            Number `json:"p"`
	EqualSlopesP Number `json:"equal_slopes_p"`
}

// Mean is an adjusted mean.
type Mean struct {
	Term    string  `json:"term"`
	Levels  Levels  `json:"levels"`
	Mean    Number  `json:"mean"`
	SE      Number  `json:"se"`
	SEM     Number  `json:"sem"`
	DF      Number  `json:"df"`
	Lower   Number  `json:"lower"`
	Upper   Number  `json:"upper"`
	N       int     `json:"n"`
	Units   int     `json:"units"`
	Letters *string `json:"letters"`
	Back    *Back   `json:"back,omitempty"`
}

// Back is a mean on the scale of measurement.
type Back struct {
	Mean  Number `json:"mean"`
	Lower Number `json:"lower"`
	Upper Number `json:"upper"`
}

// SED summarizes the standard errors of differences of a term's means.
type SED struct {
	Term string `json:"term"`
	Min  Number `json:"min"`
	Mean Number `json:"mean"`
	Max  Number `json:"max"`
	LSD  Number `json:"lsd"`
}

// Comparison is a difference of two means, a minus b.
type Comparison struct {
	Term       string `json:"term"`
	At         Levels `json:"at"`
	Method     string `json:"method"`
	A          string `json:"a"`
	B          string `json:"b"`
	Difference Number `json:"difference"`
	SE         Number `json:"se"`
	DF         Number `json:"df"`
	Statistic  Number `json:"statistic"`
	P          Number `json:"p"`
	PAdjusted  Number `json:"p_adjusted"`
	Lower      Number `json:"lower"`
	Upper      Number `json:"upper"`
}

// Contrast is a planned contrast, a trend, or what trends leave over (then Estimate and
// SE are null).
type Contrast struct {
	Name     string `json:"name"`
	Term     string `json:"term"`
	Estimate Number `json:"estimate"`
	SE       Number `json:"se"`
	DF       Number `json:"df"`
	SS       Number `json:"ss"`
	F        Number `json:"f"`
	P        Number `json:"p"`
	Planned  bool   `json:"planned"`
	// Lower and Upper are the limits of the estimate alone.
	Lower Number `json:"lower"`
	Upper Number `json:"upper"`
	// NumeratorDF is the df of the contrast itself: 1 but for lack of fit and trends of interactions.
	NumeratorDF int `json:"numerator_df"`
}

// Diagnostic is a check of the model.
type Diagnostic struct {
	Name      string `json:"name"`
	Statistic Number `json:"statistic"`
	DF        Number `json:"df"`
	P         Number `json:"p"`
	Text      string `json:"text"`
}

// Residual is what is left of one unit's value.
type Residual struct {
	Units       Levels `json:"units"`
	Observed    Number `json:"observed"`
	Fitted      Number `json:"fitted"`
	Residual    Number `json:"residual"`
	Studentized Number `json:"studentized"`
	Deleted     Number `json:"deleted"`
	Leverage    Number `json:"leverage"`
	Cook        Number `json:"cook"`
	// Score is the normal score of the studentized residual's rank; Lower and Upper hold
	// an ordered value of independent normal errors there in 95 of 100 samples.
	Score Number `json:"normal_score"`
	Lower Number `json:"envelope_lower"`
	Upper Number `json:"envelope_upper"`
}

// Efficiency is a relative efficiency of the design.
type Efficiency struct {
	Name  string `json:"name"`
	Value Number `json:"value"`
	Text  string `json:"text"`
}

// Note qualifies a result; a result is never shown without its notes.
type Note struct {
	Code string `json:"code"`
	Text string `json:"text"`
	Term string `json:"term,omitempty"`
}

// Write writes r as indented JSON with a final newline.
func (r *Results) Write(w io.Writer) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	return e.Encode(r)
}

// WriteSize writes the part of the results on the number of units, as Write does.
func WriteSize(w io.Writer, s *SampleSize) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	return e.Encode(s)
}

// Read reads a results file of format 1 of any program version; unknown keys are
// passed over.
func Read(r io.Reader) (*Results, error) {
	var out Results
	if err := json.NewDecoder(r).Decode(&out); err != nil {
		return nil, fmt.Errorf("results.json: %w", err)
	}
	if out.Format != 1 {
		return nil, fmt.Errorf("results.json: format %d; this program reads format 1", out.Format)
	}
	return &out, nil
}
