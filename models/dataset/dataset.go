// Package dataset turns tables of rate constants into data sets: temperatures in
// K, rate constants in one unit, relative standard uncertainties. Units,
// headings and cells are converted once, here, at the border.
//
// Three small grammars (heading, unit, cell) know nothing of each other's work;
// assembling a data set from a table of cells is apart from all three, so that
// another kind of table is one more reader.
package dataset

import (
	"fmt"
	"strings"
)

// Level says what a stated uncertainty was before it became a standard one.
type Level string

// The levels.
const (
	LevelNone     Level = ""         // no uncertainty stated
	LevelStandard Level = "standard" // a standard uncertainty, or converted to one from a known level
	LevelRepeats  Level = "repeats"  // s/sqrt(n), a standard error or a t interval from n <= 30 repeats: not a known uncertainty
)

// Point is one row of a data set.
type Point struct {
	File string
	Row  int // line of the file, from 1
	// Column is the heading that K stands under, where repeats stand side by side
	// and several points have one row; "" otherwise.
	Column string

	T  float64 // K
	UT float64 // u(T), K; 0 if not stated
	K  float64 // in Quantity.Unit; the limit where Limit is not ""
	UK float64 // u(k) in the same unit; 0 if not stated
	// Level is the level of UK. SD and Repeats are the standard deviation of
	// repeats and their number, where given.
	Level   Level
	SD      float64
	Repeats int

	Limit   string // "<" or ">", or ""
	Source  string
	Dataset string
	Order   float64 // run order; NaN if not given
	Note    string
	Extra   map[string]string // by heading: cells of columns that were kept, not used

	Used   bool
	WhyNot string // why the row is not used
}

// Quantity is what a rate column holds.
type Quantity struct {
	Symbol string // as written: k, k_obs, kcat/Km, D
	Unit   string // as printed: s^-1, L mol^-1 s^-1
	// Known says that the unit was understood. LnPerSecond is then what must be
	// added to ln k to have it per second (and per mol/L of standard
	// concentration where k has concentration units).
	Known       bool
	LnPerSecond float64
	Diffusion   bool // m² s⁻¹ and its kin: no Eyring form
	PerMolecule bool // cm³ molecule⁻¹ s⁻¹ and its kin
	TimeLike    bool // read as 1/τ or ln 2/t½
}

// Column says what one column was taken for.
type Column struct {
	File       string
	Index      int // from 1
	Heading    string
	Role       string // temperature, rate, uncertainty, ... or "kept"
	Unit       string
	Factor     float64 // the cell times this is the value in the unit; 1 if none
	Level      string
	Conversion string // what its numbers were divided by, or turned into; "" if nothing
	Confidence string // certain, or by assumption
	Examples   []string
}

// Notice is something a user should know that does not stop the work. Codes are
// explained by the catalogue of findings.
type Notice struct {
	Code    string
	Message string
	Cure    string
	Rows    []int
}

// Set is one data set: all points of one file, or those with one name in its
// dataset column.
type Set struct {
	Name     string
	Files    []string
	SHA256   string // of the bytes read, in hex
	Points   []Point
	Quantity Quantity
	Columns  []Column
	Assumed  []string // every assumption the user made for us
	Notices  []Notice
}

// UsedPoints returns the points that take part.
func (s *Set) UsedPoints() []Point {
	var ps []Point
	for _, p := range s.Points {
		if p.Used {
			ps = append(ps, p)
		}
	}
	return ps
}

// Problem is one reason why a file cannot be used. Row is a line number from 1, 0
// where a problem concerns the whole file; Column is a heading.
type Problem struct {
	Code    string `json:"code"`
	File    string `json:"file"`
	Sheet   string `json:"sheet"`
	Row     int    `json:"row"`
	Column  string `json:"column"`
	Message string `json:"message"`
	Cure    string `json:"cure"`
}

// String prints file:line: column "…": what is wrong; what would be right.
func (p Problem) String() string {
	s := p.File
	if p.Sheet != "" {
		s += "[" + p.Sheet + "]"
	}
	if p.Row > 0 {
		s += fmt.Sprintf(":%d", p.Row)
	}
	if p.Column != "" {
		s += fmt.Sprintf(": column %q", short(p.Column))
	}
	s += ": " + p.Message
	if p.Cure != "" { // which goes on with the sentence
		s = strings.TrimSuffix(s, ".") + "; " + p.Cure
	}
	return s
}

// Problems is the error of a file that cannot be used: all its problems at once.
type Problems []Problem

// Error lists the first twenty problems, one a line, and counts the rest.
func (ps Problems) Error() string {
	const most = 20
	var s string
	for i, p := range ps {
		if i == most {
			return s + fmt.Sprintf("\nand %d more", len(ps)-most)
		}
		if i > 0 {
			s += "\n"
		}
		s += p.String()
	}
	return s
}

// Options are what a user says about a file. The zero value reads everything
// that is certain.
type Options struct {
	Dataset    string              // keep the rows of this data set
	Columns    map[string][]string // role → headings (--column); several rates are repeats
	Assume     map[string]string   // T=degC, log=lg, k=rate, error=1, n=3 (--assume)
	Decimal    string              // comma or point; "" decides by the file
	Where      []string            // conditions 'source!=Lab3', 'pH=7.0' (--where)
	WhereMet   bool                // refuse a condition that no row meets; leave it off where other tables may
	LeaveOut   []int               // lines of the file
	TMin, TMax float64             // K; 0 if none
	// DatasetBy is the heading of a column whose values name the data sets,
	// where there is no column dataset (--dataset-by).
	DatasetBy string
	// Headings gives headings, by their normal form (NormalHeading), the text that
	// says what they mean, such as "T/K" for "temp".
	Headings map[string]string
	// AllowNonPositiveK accepts k <= 0, which error models additive in k take
	// as data.
	AllowNonPositiveK bool
}
