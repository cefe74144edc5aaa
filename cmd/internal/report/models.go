package report

import (
	"fmt"
	"io"
	"slices"
	"strings"
	"unicode/utf8"

	"onebarrier/models"
)

// ModelsSchema names the layout of the catalogue of curves.
const ModelsSchema = "onebarrier.models/1"

// Models is the catalogue of curves as a document.
type Models struct {
	Schema string  `json:"schema"`
	Curves []Curve `json:"curves"`
}

// Curve is one entry of the catalogue.
type Curve struct {
	Curve      string         `json:"curve"`
	Family     string         `json:"family"`
	Formula    string         `json:"formula"`
	Summary    string         `json:"summary"`
	Source     string         `json:"source"`
	ETrend     string         `json:"e_trend"`    // none, rises, falls or either
	Default    bool           `json:"default"`    // fitted when no candidates are named
	Parameters []models.Param `json:"parameters"` // canonical
	Forms      []Form         `json:"forms"`
}

// Form is one reading of a curve.
type Form struct {
	Model         string         `json:"model"`
	Formula       string         `json:"formula"`
	Source        string         `json:"source"`
	NeedsTimeUnit bool           `json:"needs_time_unit"`
	Parameters    []models.Param `json:"parameters"`
}

// NewModels describes curves.
func NewModels(curves []models.Curve) Models {
	var defaults []string
	for _, c := range models.Default() {
		defaults = append(defaults, c.Info().Name)
	}
	doc := Models{Schema: ModelsSchema}
	for _, c := range curves {
		in := c.Info()
		entry := Curve{in.Name, in.Family, in.Formula, in.Summary, in.Source, in.Trend.String(),
			slices.Contains(defaults, in.Name), in.Params, nil}
		for _, f := range c.Forms() {
			entry.Forms = append(entry.Forms, Form{f.Name, f.Formula, f.Source, f.NeedsTimeUnit, f.Params})
		}
		doc.Curves = append(doc.Curves, entry)
	}
	return doc
}

// WriteModels prints the catalogue: one paragraph a curve, its forms beneath it.
// With details, the parameters, their units and the sources too.
func WriteModels(w io.Writer, doc Models, details bool, t Text) error {
	p := t.newPage()
	for _, c := range doc.Curves {
		lines := []string{p.bold(c.Curve) + strings.Repeat(" ", max(2, 24-len(c.Curve))) + c.Formula}
		lines = append(lines, Wrap(c.Summary, p.body())...)
		if !details {
			for _, f := range c.Forms {
				label := "· " + f.Model
				if utf8.RuneCountInString(label) > 22 { // the formula stays beneath formulas
					lines, label = append(lines, label), ""
				}
				lines = append(lines, hang(label, 24, f.Formula, p.body())...)
			}
			p.section("curve", lines...)
			continue
		}
		facts := [][2]string{
			{"family", c.Family},
			{"E over T", trend(c.ETrend)},
			{"fitted", map[bool]string{true: "by default", false: "when named by --models"}[c.Default]},
			{"source", c.Source},
		}
		for _, f := range facts {
			lines = append(lines, hang(f[0], 10, f[1], p.body())...)
		}
		p.section("curve", lines...)
		for _, f := range c.Forms {
			lines := append([]string{p.bold(f.Model)}, Wrap(f.Formula, p.body())...)
			for _, q := range f.Parameters {
				lines = append(lines, hang("  "+symbol(q.Symbol), 10, q.Name+", "+paramUnit(q.Unit), p.body())...)
			}
			if f.NeedsTimeUnit {
				lines = append(lines, Wrap("withheld where the unit of k is not understood: the entropy needs its time unit and standard state", p.body())...)
			}
			lines = append(lines, hang("source", 10, f.Source, p.body())...)
			p.section("form", lines...)
		}
	}
	if !details {
		p.section("next", "onebarrier models NAME   parameters, units and sources")
	}
	return p.writeTo(w)
}

func trend(t string) string {
	switch t {
	case "rises":
		return "can only rise with T"
	case "falls":
		return "can only fall with T"
	case "either":
		return "may rise or fall with T: the data decide"
	}
	return "constant, apart from the RT terms of a fixed exponent"
}

// symbol prints a parameter's symbol as a chemist writes it.
func symbol(s string) string {
	switch s {
	case "ln_A", "ln_A1", "ln_A2":
		return strings.Replace(s, "_", string(nbsp), 1)
	case "dH":
		return "ΔH‡"
	case "dS":
		return "ΔS‡"
	case "dCp":
		return "ΔC_p‡"
	case "dCp_dT":
		return "dΔC_p‡/dT"
	case "dH_d":
		return "ΔH_d"
	case "T0":
		return "T_0"
	case "nu":
		return "ν‡"
	}
	return s
}

// unit prints a unit as a chemist writes it; the unit "k" of a logarithm and the
// unit "1" print nothing.
func unit(s string) string {
	switch s {
	case "k", "1":
		return ""
	case "kJ mol^-1":
		return "kJ/mol"
	case "J mol^-1 K^-1":
		return "J/(mol K)"
	case "J mol^-1 K^-2":
		return "J/(mol K²)"
	}
	return s
}

func paramUnit(s string) string {
	switch s {
	case "k":
		return "in the unit of k"
	case "1":
		return "a pure number"
	}
	return fmt.Sprintf("in %s", unit(s))
}
