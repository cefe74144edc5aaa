package survey

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"path/filepath"
	"reflect"
	"regexp"
	"strings"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
)

// UnknownCount is a count that is not known, as those of a file that cannot be read.
const UnknownCount = -1

// Row is one data set in the table of a survey, or a file or sheet that gave none.
// Unknown numbers are NaN, unknown counts UnknownCount, Material nil. Where the data
// set was not assessed ErrorCode is not "", and State is.
//
// The fields are the columns, in their order; the tag is the column's name.
type Row struct {
	SetID      string `column:"set_id"` // of file, sheet and name; the same in every store
	Dataset    string `column:"dataset"`
	SourceFile string `column:"source_file"`
	Sheet      string `column:"sheet"`

	Points       int     `column:"points"`
	Temperatures int     `column:"temperatures"`
	LeftOut      int     `column:"left_out"` // points that are not used
	Sources      int     `column:"sources"`
	TMin         float64 `column:"t_min_k"`
	TMax         float64 `column:"t_max_k"`
	Quantity     string  `column:"quantity"`
	RateUnit     string  `column:"rate_unit"`
	ErrorModel   string  `column:"error_model"`

	State         string  `column:"state"`
	Material      *bool   `column:"material"` // nil where the interval of |ΔE| lies about the tolerance
	ETrend        string  `column:"e_trend"`
	Exponent      float64 `column:"exponent"`
	ExponentLower float64 `column:"exponent_lower"`
	ExponentUpper float64 `column:"exponent_upper"`
	EChange       float64 `column:"e_change_kj_per_mol"`
	EChangeLower  float64 `column:"e_change_lower"`
	EChangeUpper  float64 `column:"e_change_upper"`
	Detectable    float64 `column:"detectable_kj_per_mol"`
	PValue        float64 `column:"p_value"`
	PBand         float64 `column:"p_band"`
	QValue        float64 `column:"q_value"` // depends on all rows: NaN in the store
	QBand         float64 `column:"q_band"`  // as QValue

	SecondBarrierP   float64 `column:"second_barrier_p"`
	RecommendedCurve string  `column:"recommended_curve"`
	FirstCurve       string  `column:"first_curve"`
	FirstWeight      float64 `column:"first_weight"`
	StraightE        float64 `column:"straight_e_kj_per_mol"`
	StraightEU       float64 `column:"straight_e_u"`  // standard uncertainty, kJ/mol
	StraightLnA      float64 `column:"straight_ln_a"` // A in RateUnit
	StateShare       float64 `column:"state_share"`   // repeat share of State
	Warnings         string  `column:"warnings"`      // codes of warnings and alarms, a space between

	ErrorCode string `column:"error_code"`
	Error     string `column:"error"`
	ErrorRow  int    `column:"error_row"` // line of the file; UnknownCount where it has none
}

// columns are the names of the columns, kinds their types, found once.
var columns, kinds = func() (names []string, kinds []reflect.Kind) {
	for f := range reflect.TypeFor[Row]().Fields() {
		names = append(names, f.Tag.Get("column"))
		kinds = append(kinds, f.Type.Kind())
	}
	return names, kinds
}()

// Columns lists the names of the columns in their order.
func (Row) Columns() []string { return append([]string(nil), columns...) }

// Values lists the values of the columns in their order: string, int64, float64 or
// bool, nil where a value is not known. Strings are always known, be they "".
func (r *Row) Values() []any { return r.appendValues(make([]any, 0, len(columns))) }

func (r *Row) appendValues(out []any) []any {
	v := reflect.ValueOf(r).Elem()
	for i, kind := range kinds {
		f := v.Field(i)
		switch kind {
		case reflect.String:
			out = append(out, f.String())
		case reflect.Int:
			if n := f.Int(); n == UnknownCount {
				out = append(out, nil)
			} else {
				out = append(out, n)
			}
		case reflect.Float64:
			if x := f.Float(); math.IsNaN(x) || math.IsInf(x, 0) {
				out = append(out, nil)
			} else {
				out = append(out, x)
			}
		default: // *bool
			if f.IsNil() {
				out = append(out, nil)
			} else {
				out = append(out, f.Elem().Bool())
			}
		}
	}
	return out
}

// emptyRow is a row of which nothing is known.
func emptyRow() Row {
	var r Row
	v := reflect.ValueOf(&r).Elem()
	for i, kind := range kinds {
		switch kind {
		case reflect.Int:
			v.Field(i).SetInt(UnknownCount)
		case reflect.Float64:
			v.Field(i).SetFloat(math.NaN())
		}
	}
	return r
}

// Testable reports whether the data set could be tested for curvature, so that its
// p-value counts among those that the false discoveries are controlled for.
func (r *Row) Testable() bool { return r.ErrorCode == "" && !math.IsNaN(r.PValue) }

// assessed fills a row from an assessment; what names the set is the caller's.
func (r *Row) assessed(a *diagnostics.Assessment) {
	d, c := &a.Dataset, &a.Curvature
	r.Points, r.Temperatures, r.LeftOut, r.Sources = d.Points, d.Temperatures, d.Points-d.Used, len(d.Sources)
	r.TMin, r.TMax = float64(d.TMin), float64(d.TMax)
	r.Quantity, r.RateUnit = d.Quantity.Symbol, d.Quantity.Unit
	r.ErrorModel = string(a.Settings.ErrorModel)
	r.State, r.ETrend, r.Material = string(a.Verdict.State), a.Verdict.ETrend, a.Verdict.Material
	r.Exponent, r.ExponentLower, r.ExponentUpper = interval(c.Exponent)
	r.EChange, r.EChangeLower, r.EChangeUpper = interval(c.EChange)
	r.Detectable = float64(c.Detectable.Value)
	r.PValue, r.PBand = float64(c.PValue), float64(c.PBand)
	if c.SecondBarrier != nil {
		r.SecondBarrierP = float64(c.SecondBarrier.PValue)
	}
	r.RecommendedCurve = a.Verdict.RecommendedCurve
	if len(a.Ranking) > 0 && a.Ranking[0].Status == diagnostics.StatusRanked {
		r.FirstCurve, r.FirstWeight = a.Ranking[0].Curve, float64(a.Ranking[0].FamWeight)
	}
	r.StraightE, r.StraightEU, r.StraightLnA = straightLine(a)
	if a.Bootstrap != nil {
		if share, known := a.Bootstrap.RepeatShare[a.Verdict.State]; known {
			r.StateShare = float64(share)
		}
	}
	r.Warnings = warnings(a.Findings)
}

func interval(e diagnostics.Estimate) (value, lower, upper float64) {
	return float64(e.Value), float64(e.Lower), float64(e.Upper)
}

// straightLine reads E in kJ/mol, u(E) and ln A from the fit of the straight line,
// which every assessment has.
func straightLine(a *diagnostics.Assessment) (e, u, lnA float64) {
	f := a.Fits[models.Straight().Info().Name]
	if f == nil || !f.Usable() {
		return math.NaN(), math.NaN(), math.NaN()
	}
	u = math.NaN()
	if f.Cov != nil {
		u = math.Sqrt(f.Cov[3]) / 1000
	}
	return f.P[1] / 1000, u, f.P[0] + f.P[1]/(models.GasConstant*f.TRef)
}

// warnings lists the codes of warnings and alarms, each once.
func warnings(findings []diagnostics.Finding) string {
	var b []byte
	seen := map[string]bool{}
	for _, f := range findings {
		if f.Severity == diagnostics.Info || seen[f.Code] {
			continue
		}
		seen[f.Code] = true
		if len(b) > 0 {
			b = append(b, ' ')
		}
		b = append(b, f.Code...)
	}
	return string(b)
}

// reOffered finds the flags that a cure offers: --column 'T=bath', --assume T=degC.
var reOffered = regexp.MustCompile(`--(?:column '(T|k)=((?:[^']|'\\'')*)'|assume (\w+)=(\S+))`)

// cureOf is the cure of a problem of one file among many. What a flag says holds for
// all files of a survey, so that a line of the columns file takes its place.
func cureOf(p *dataset.Problem) string {
	switch p.Code {
	case "ambiguous-temperature", "ambiguous-rate", "no-temperature", "no-rate":
	default:
		return p.Cure
	}
	var lines []string
	first := len(p.Cure)
	for _, at := range reOffered.FindAllStringSubmatchIndex(p.Cure, -1) {
		first = min(first, at[0])
		group := func(i int) string {
			if at[2*i] < 0 {
				return ""
			}
			return p.Cure[at[2*i]:at[2*i+1]]
		}
		if line := columnsLine(p, group(1), strings.ReplaceAll(group(2), `'\''`, "'"), group(3), group(4)); line != "" {
			lines = append(lines, line)
		}
	}
	if first == len(p.Cure) {
		return p.Cure
	}
	// What stands before the flags: "write the heading as T/K or t/°C".
	before := p.Cure[:first]
	before = before[:max(strings.LastIndex(before, ", or "), strings.LastIndex(before, "; "), 0)]
	if len(lines) > 0 {
		if before != "" {
			before += ", or "
		}
		before += fmt.Sprintf("write one line, with the right unit, into %s in its folder, below the line %s: %s", ColumnsFile, columnsHead, strings.Join(lines, " or "))
	}
	if before == "" {
		return p.Cure
	}
	return before
}

// columnsLine is the line of a columns file that says for one file what a flag says for
// all: --column role=heading, or --assume key=value for the heading of the problem. ""
// where no line says it.
func columnsLine(p *dataset.Problem, role, heading, key, value string) string {
	unit := ""
	switch {
	case role == "T":
		unit = "K"
	case role == "k":
		unit = "s^-1"
	case key == "T":
		role, heading, unit = "T", p.Column, value
	case key == "log":
		role, heading = map[string]string{"lg": "lg k", "ln": "ln k"}[value], p.Column
	case key == "k" && value == "rate":
		role, heading = "k", p.Column
	}
	if role == "" || heading == "" {
		return ""
	}
	if _, err := headingFor(heading, role, unit, ""); err != nil {
		return ""
	}
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	if err := w.Write([]string{filepath.Base(p.File), heading, role, unit, ""}); err != nil {
		return ""
	}
	w.Flush()
	return strings.TrimSpace(b.String())
}
