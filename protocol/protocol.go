// Package protocol reads protocol.toml, the statement of what a trial intends:
// treatments, physical units and what each unit receives, responses, analysis,
// conduct. It validates everything that can be said from the file alone and is the
// only reader of that file. Format 1.
package protocol

import "math"

// Protocol is a decoded, validated protocol file with its defaults filled in. It is
// not changed after Load. Positions of its keys are had from Pos.
type Protocol struct {
	File string // path inside the trial folder

	Format        int // key protocol; 1
	Trial         Trial
	Persons       []Person
	Approval      *Approval
	Animals       *Animals
	Material      *Material
	Site          *Site
	Plot          *Plot
	Inputs        []Input
	Eligibility   Eligibility
	Housing       *Housing
	Welfare       *Welfare
	Factors       []Factor
	Treatments    []Treatment
	Items         []Item
	Tables        []ExtraTable
	Units         []Unit
	Roster        *Roster
	Randomization Randomization
	Blinding      *Blinding
	SampleSize    *SampleSize
	Responses     []Response
	Covariates    []Covariate
	Repeated      []Repeated
	CarryOver     *CarryOver
	TimeTrend     *TimeTrend
	Analysis      Analysis
	Data          *Data
	Corrections   []Correction
	Exclusions    []Exclusion
	Events        []Event
	Deviations    []Deviation
	Amendments    []Amendment
	Signatures    []Signature
	Records       *Records
	Report        Report

	// Source is the text of the protocol file as read.
	Source []byte
	// Texts holds the content of every { file = "…" } text that was read, by path.
	Texts map[string]string

	index keyIndex
}

// Date is a local date; the zero Date is absent.
type Date struct{ Year, Month, Day int }

// Quantity is an amount with its unit: a single value (From == To) or a range.
type Quantity struct {
	From, To float64
	Unit     string
}

// Text is prose given as a string or as a Markdown file of the folder. Body is the
// prose either way; File is empty when it was given as a string.
type Text struct {
	Body string
	File string
}

// Trial identifies the trial.
type Trial struct {
	Code, Title                  string
	Background, SpeciesRationale Text
	Objective                    Text
	Hypotheses                   []string
	Called                       string
	Site                         string
	Start, End                   Date
	Registration                 string
	Funding, Interests           string
	DataAccess                   string
}

// Person is somebody named in the protocol.
type Person struct{ Name, Role, ORCID, Affiliation string }

// Approval is the ethics or animal-use approval.
type Approval struct {
	Body, Number               string
	Date, Expires              Date
	Legislation                string
	Severity, SeverityObserved string
}

// Animals describes the animals of a trial.
type Animals struct {
	Species, Breed, Sex, Source   string
	Health, Genotype, PreviousUse string
	FoodChain                     *bool
	Age, Mass, MassEnd            *Quantity
	Acclimatization               *Quantity
}

// Material describes plants, plots or samples where there are no animals.
type Material struct{ Crop, Variety, SeedRate, Source string }

// Site is the place of a field trial.
type Site struct {
	Name                                string
	Latitude, Longitude                 *float64
	Soil, Season, PreviousCrop, Weather string
}

// Plot gives the plot of a field trial.
type Plot struct {
	Length, Width, NetArea, Border *Quantity
	RowColumn                      []string
}

// Input is something applied to the whole trial on a day.
type Input struct {
	On         Date
	What, Rate string
}

// Eligibility is set before the trial.
type Eligibility struct{ Include, Exclude, ExclusionRules []string }

// Housing describes how animals are kept.
type Housing struct {
	GroupSize                     int
	FloorArea, Temperature        *Quantity
	Lighting, Bedding, Enrichment string
	Feed, Water                   string
}

// Welfare is what the protocol says of the animals' welfare.
type Welfare struct {
	Aim             string
	HumaneEndpoints []string
	Rescue          Text
	Monitoring      Monitoring
	Euthanasia      Text
	Fate            string
	Residues        string
	StaffSafety     []string
	Replacement     Text
	Reduction       Text
	Refinement      Text
	Procedures      []Procedure
}

// Monitoring tells how often and by whom animals are looked at.
type Monitoring struct {
	TimesPerDay float64
	By          string
}

// Procedure is something done to the animals.
type Procedure struct {
	Kind, Name             string
	Volume, Every          *Quantity
	Duration               *Quantity // of fasting, restraint, single housing, transport
	Times                  int
	Route, How, Where      string
	Why                    string
	Analgesia, Anaesthesia string
}

// Factor is a treatment factor, or a class that units carry.
type Factor struct {
	Name, Label, Unit string
	Levels            []string  // as printed in data and results
	Values            []float64 // nil for a qualitative factor; else the numbers of Levels
	Control           []string  // levels that are controls, the first being the reference
	Describe          []Described
	Random            bool
}

// Described is the description of one level, in the order of the levels.
type Described struct{ Level, Text string }

// Treatment is one listed treatment where treatments are not the full crossing.
type Treatment struct {
	Code    string
	Levels  map[string]string // factor name → level; empty: outside the factorial
	Control bool
}

// Item is a test item, diet or product.
type Item struct {
	Name, Batch, Purity         string
	Expires                     Date
	Storage, Supplier, Analysed string
}

// ExtraTable is a CSV file printed in a section of the report.
type ExtraTable struct{ File, Caption, Section string }

// Unit is a physical unit: what nests, crosses, receives, carries.
type Unit struct {
	Name, Label   string
	Within        string      // name of the parent unit; empty: none
	Crosses       []string    // names of the crossed units; a crossing unit has no count
	Count         []int       // one number for all parents, or one for each parent in order; nil for a crossing unit
	Labels        [][]string  // names of the units: one list for all parents or one list per parent; nil: numbered
	Numbered      string      // "within" (default) or "through"
	Receives      []string    // factor names, or "treatment"
	Carries       []string    // factor names
	Replicates    []Replicate // units for each level, where unequal; nil: as equal as can be
	Checks        []string    // treatment codes repeated in every block of an augmented design
	Animals       []int       // animals in each unit: one number, or one for each unit; nil: none or from the roster
	AnimalsColumn string      // roster column that holds the number of animals
	Basis         string
	Random        *bool
	Interacts     bool
}

// Replicate says how many units receive a level.
type Replicate struct {
	Level string
	N     int
}

// Roster is the list of animals or plots as they stood before the draw.
type Roster struct{ File, BlockBy string }

// Randomization says how the draw is made.
type Randomization struct {
	Seed, Method string
	BalanceOn    []string
	Candidates   int // default 1
	Codes        bool
	By           string
	On           Date
}

// Blinding says who knew the allotment when.
type Blinding struct {
	Allocation, Conduct, Assessment, Analysis string
	KeyHolder                                 string
	Unblinded                                 Date
}

// SampleSize is the justification of the number of units.
type SampleSize struct {
	Basis, Response, Term, Contrast string
	Difference, DifferencePercent   *float64
	Margin, HalfWidth               *float64
	SD                              []StratumValue // one without a stratum, or one per stratum
	CV, ICC                         *float64
	Power                           *float64
	Sides                           int
	Attrition                       *float64
	Source                          string
}

// StratumValue is a number for a stratum; Stratum is empty when it holds for all.
type StratumValue struct {
	Stratum string
	Value   float64
}

// Response is something measured to compare treatments.
type Response struct {
	Name, Label, Unit  string
	Role, Kind, Method string
	How, Instrument    string
	Assessed           string
	Range              *[2]float64
	Decimals           *int
	Covariates         []string
	Transform          string
	Offset             *float64
	Compute            string
	RecordedOn         string
	Aggregate          string // "", mean, sum, ratio
	File, Over         string
	Where              []Condition
	Repeated           string
	Total, Event       string
	Comparison         string     // "" takes that of [analysis]
	Contrasts          []Contrast // added to those of [analysis]
	Alpha              *float64
	Margin             *float64
}

// Condition keeps rows whose column equals a value.
type Condition struct{ Column, Value string }

// Covariate is measured before treatment and adjusted for.
type Covariate struct {
	Name, Label, Unit string
	Measured          Date
	Slopes            string // common | by stratum
}

// Repeated is a set of times at which responses are measured on the same unit.
type Repeated struct {
	Name, Label, On, Unit string
	At                    []string
	Values                []float64 // nil where the times are words
	Correlation           string
}

// Steps gives the times as numbers for a correlation that falls with their distance: their
// values where they are unequally spaced, else 0, 1, 2 …, so that the correlation is that of
// neighbours; also where times are words.
func (r *Repeated) Steps() []float64 {
	n := len(r.At)
	steps := make([]float64, n)
	for i := range steps {
		steps[i] = float64(i)
	}
	v := r.Values
	if len(v) != n || n < 3 {
		return steps
	}
	for i := 2; i < n; i++ {
		if d := v[1] - v[0]; math.Abs(v[i]-v[i-1]-d) > 1e-9*math.Abs(d) {
			return v
		}
	}
	return steps
}

// CarryOver declares a crossover.
type CarryOver struct {
	Factor, Along, On string
	Sequences         [][]string
}

// TimeTrend gives each unit its own polynomial over the periods.
type TimeTrend struct {
	On, Along string
	Order     int
	Sequences [][]string // of levels, one for each sequence; nil: none given
}

// Analysis says what will be done, before the data.
type Analysis struct {
	Alpha             float64
	Tendency          float64 // 0: none stated
	Comparison        string
	Side              string
	Pairs             string
	Letters           string
	Trend             int
	Interactions      int // greatest number of factors in a term: 1 for "none"; -1: auto
	Blocks            string
	Adjustment        string
	DFMethod          string
	Components        string
	Limits            string
	VarianceBy        string
	RandomizationTest int
	ErrorDFMin        int
	Margin            float64
	Assumptions       string
	Contrasts         []Contrast
	DoseResponse      *DoseResponse
}

// Contrast is a planned comparison of the levels of a factor.
type Contrast struct {
	Name, Factor string
	Weights      []Weight // in the order of the file
}

// Weight is a contrast's coefficient for a level.
type Weight struct {
	Level string
	Value float64
}

// DoseResponse names the models to be fitted over a quantitative factor.
type DoseResponse struct {
	Factor string
	Models []string
}

// Data says where the data are and how they are written.
type Data struct {
	File               string
	Missing            []string
	Delimiter, Decimal string // "auto" or the character
	DateColumn         string // key date
	Columns            []ColumnName
	Locked             Date
	EnteredBy          string
	CheckedBy          string
	None               []string // what the author confirms that there was none of: exclusion, event, deviation
	Further            []FurtherData
	Confirmed          []Confirmed
}

// ColumnName maps our name to a file's heading.
type ColumnName struct{ Name, Heading string }

// FurtherData is another data file, at its own unit.
type FurtherData struct{ File, Unit string }

// UnitName points at one unit by the names of the units that identify it, in the
// order of the file: block = "2", pen = "7".
type UnitName []NamedUnit

// NamedUnit is one part of a UnitName.
type NamedUnit struct{ Unit, Name string }

// Confirmed is a value outside its range that was checked and stands.
type Confirmed struct {
	Unit     UnitName
	At       string
	Response string
	Value    float64
	Note, By string
}

// Correction replaces a written value on reading.
type Correction struct {
	File             string
	Unit             UnitName
	At               string
	Column           string
	Old, New, Reason string
	By               string
	On, Recorded     Date
}

// Exclusion leaves a unit out of the analysis, by name and with a reason.
type Exclusion struct {
	Unit             UnitName
	At               string
	Responses        []string
	Reason, Rule, By string
	On               Date
	BeforeUnblinding *bool
}

// Event is something that happened to a unit.
type Event struct {
	On            Date
	Unit          UnitName
	Animals       int
	Kind          string
	Cause, Action string
	Mass          *Quantity
	By            string
	Given         string
	From, To      Date
}

// Deviation is a departure from the plan that was not intended.
type Deviation struct {
	On               Date
	What, Effect, By string
}

// Amendment is a change of the plan after it was sealed.
type Amendment struct {
	On                      Date
	What, Why, By, Approval string
}

// Signature is somebody's statement on a day.
type Signature struct {
	Who, Meaning string
	On           Date
}

// Records says where and how long the records are kept.
type Records struct {
	Location    string
	RetainUntil Date
}

// Report says how the report is made.
type Report struct {
	Template  string
	Narrative []NarrativePart
	Paper     string
	Decimals  string
}

// NarrativePart is a file that the author brings for a place of the report, which is one
// of NarrativePlaces.
type NarrativePart struct{ Place, File string }

// NarrativePlaces are the places of a report that an author may write for, in the order
// in which they are read. A summary and an abstract stand at the same place.
func NarrativePlaces() []string {
	return []string{"summary", "abstract", "introduction", "methods", "results", "discussion", "conclusion", "acknowledgements"}
}
