package survey

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"

	"onebarrier/models/dataset"
)

// ColumnsFile settles ambiguous headings of the files of its folder and of those
// below: a table with the headings files, heading, role, unit and level.
const ColumnsFile = "onebarrier-columns.csv"

// columnsHead is its first line.
const columnsHead = "files,heading,role,unit,level"

// columnRule says what a heading means in files that match a pattern.
type columnRule struct {
	files   string // pattern of names, of paths below dir where it has a slash
	heading string // in normal form
	means   string // a heading that says it
}

// settleBy finds what the headings of a file mean; the first rule counts.
func settleBy(rules []columnRule, rel string, settled map[string]string) {
	for _, r := range rules {
		if _, known := settled[r.heading]; known {
			continue
		}
		if r.files == "" || matchesAny([]string{r.files}, path.Base(rel), rel) {
			settled[r.heading] = r.means
		}
	}
}

// readColumnsFile reads the columns file of a folder; no rules where there is none.
func readColumnsFile(dir string) ([]columnRule, *dataset.Problem) {
	name := filepath.Join(dir, ColumnsFile)
	problem := func(row int, message, cure string) *dataset.Problem {
		return &dataset.Problem{Code: "columns-file", File: name, Row: row, Message: message, Cure: cure}
	}
	data, err := os.ReadFile(name)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, problem(0, reason(err).Error(), "check your right to read it")
	}
	r := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))))
	r.FieldsPerRecord, r.Comment, r.TrimLeadingSpace = -1, '#', true
	const headings = columnsHead
	head, err := r.Read()
	if err != nil || strings.Join(head, ",") != headings {
		return nil, problem(1, "its first line is not "+headings, "write that line, and one for each heading below it")
	}
	var rules []columnRule
	for {
		cells, err := r.Read()
		if err == io.EOF {
			return rules, nil
		}
		var bad *csv.ParseError
		if errors.As(err, &bad) {
			return nil, problem(bad.Line, bad.Err.Error(), "write five cells: "+headings)
		}
		line, _ := r.FieldPos(0)
		if len(cells) != 5 || cells[1] == "" || cells[2] == "" {
			return nil, problem(line, "it does not say which heading has which role", "write five cells: "+headings)
		}
		for i := range cells {
			cells[i] = strings.TrimSpace(cells[i])
		}
		if _, err := path.Match(cells[0], ""); err != nil {
			return nil, problem(line, (&PatternError{cells[0]}).Error(), "correct the pattern")
		}
		means, err := headingFor(cells[1], cells[2], cells[3], cells[4])
		if err != nil {
			return nil, problem(line, err.Error(), "write a role such as temperature, k, ln k, u(k), source or dataset, and a unit and level that go with it")
		}
		rules = append(rules, columnRule{cells[0], dataset.NormalHeading(cells[1]), means})
	}
}

// headingFor writes the heading that says what a role, a unit and a level mean.
func headingFor(heading, role, unit, level string) (string, error) {
	per := ""
	if unit != "" {
		per = "/" + unit
		if strings.ContainsAny(unit, " /") {
			per = "/(" + unit + ")"
		}
	}
	var means string
	want := map[dataset.Role]bool{}
	switch role {
	case "temperature", "T":
		means = "T" + per
		switch unit {
		case "°C", "degC", "C", "degF", "°F":
			means = "t" + per
		}
		if strings.Contains(unit, "T") { // 1000/T, 10^3 K/T
			means = unit
		}
		want[dataset.RoleTemperature] = true
	case "k", "rate constant", "rate":
		means = "k" + per
		if h := dataset.ParseHeading(heading, nil); h.Role == dataset.RoleRate && h.Symbol != "" && h.Form != dataset.FormLn && h.Form != dataset.FormLg {
			if named := dataset.ParseHeading(h.Symbol+per, nil); named.Role == dataset.RoleRate && named.Ambiguity == nil {
				means = h.Symbol + per // the symbol is kept
			}
		}
		want[dataset.RoleRate] = true
	case "ln k", "lg k":
		f := role[:2]
		means = f + "(k" + per + ")"
		want[dataset.RoleRate] = true
	case "lifetime", "tau":
		means = "tau" + per
		want[dataset.RoleRate] = true
	case "half-life", "t_1/2":
		means = "t_1/2" + per
		want[dataset.RoleRate] = true
	case "D":
		means = "D" + per
		want[dataset.RoleRate] = true
	case "u(k)", "uncertainty":
		switch level {
		case "", "1", "standard":
			means = "u(k)" + per
		case "2":
			means = "U(k)" + per + " (k=2)"
		case "95", "95%", "95 %":
			means = "U_95(k)" + per
		case "sd", "s":
			means = "s(k)" + per
		default:
			return "", fmt.Errorf("the level %q of an uncertainty is none of 1, 2, 95 %% and sd", level)
		}
		if unit == "%" {
			means = map[string]string{"": "u_r(k)/%", "1": "u_r(k)/%", "standard": "u_r(k)/%", "2": "U_r(k)/% (k=2)", "sd": "RSD/%", "s": "RSD/%"}[level]
		}
		want[dataset.RoleUncertainty] = true
	case "u(T)":
		means = "u(T)" + per
		want[dataset.RoleTemperatureUncertainty] = true
	case "source", "dataset", "order", "note", "limit", "n", "coverage_factor":
		return role, nil
	case "ignore", "kept":
		return "not used", nil
	default:
		means = role + per
	}
	h := dataset.ParseHeading(means, nil)
	if h.Role == dataset.RoleKept || h.Ambiguity != nil || len(want) > 0 && !want[h.Role] {
		return "", fmt.Errorf("the role %q with the unit %q is not understood", role, unit)
	}
	return means, nil
}
