package dataset

import (
	"path/filepath"
	"strings"
)

// workbookNames are the endings of files that should be workbooks.
var workbookNames = []string{".xlsx", ".xlsm", ".xlsb", ".xls", ".ods"}

// isWorkbookName reports whether the name of a table is that of a workbook.
func (t *Table) isWorkbookName() bool {
	ext := strings.ToLower(filepath.Ext(t.Name))
	for _, e := range workbookNames {
		if ext == e {
			return t.Sheet == ""
		}
	}
	return false
}

// isProse reports whether a text whose first row of several cells is row i is no
// table: nothing in that row is a temperature or a rate constant, no row below it holds
// two numbers, and half of them none.
func (t *Table) isProse(i int) bool {
	if i == len(t.Rows) { // words alone in their rows
		return i > 0 && t.isWorkbookName()
	}
	for _, c := range t.Rows[i].Cells {
		if h := ParseHeading(c, nil); h.Role == RoleTemperature || h.Role == RoleRate {
			return false
		}
	}
	below := t.Rows[i+1 : min(len(t.Rows), i+headRows)]
	withNumber := 0
	for _, r := range below {
		numbers := 0
		for _, c := range r.Cells {
			if eitherMark(c, 0).Kind != CellText && !isMissing(normalize(c)) {
				numbers++
			}
		}
		if numbers > 1 {
			return false
		}
		withNumber += numbers
	}
	return 2*withNumber <= len(below)
}

// refuseProse refuses a text that is no table.
func (m *maker) refuseProse(i int) {
	if m.t.isWorkbookName() {
		m.refuse(codeWorkbookDamaged, 0, "", "this is no workbook, whatever its name says: it is text without a table")
		return
	}
	m.refuseCure(codeNoData, m.t.Rows[i].Line, "", "this looks like no table: no heading is a temperature or a rate constant, and its rows are words",
		"write one row of headings such as T/K,k/s^-1 and one row for each measurement; keep a file that is no table out of a survey with --exclude")
}

// Units and names of quantities that are neither temperatures nor rate constants, as
// they are written most.
var (
	otherUnits = wordSet("Pa hPa kPa MPa GPa bar mbar atm torr mmHg psi g mg kg L mL ml V mV A mA J kJ kcal cal eV J/mol kJ/mol kcal/mol M mM mol/L mmol/L mol/dm3 mol mmol m cm mm nm %")
	otherNames = wordSet("pressure pH pD volume mass concentration conc wavelength yield conversion voltage absorbance")
)

func wordSet(words string) map[string]bool {
	set := map[string]bool{}
	for _, w := range strings.Fields(words) {
		set[strings.ToLower(w)] = true
	}
	return set
}

// isOtherQuantity reports whether a heading is clearly that of another quantity, by its
// name or its unit: p/bar, pH, c (mol/L).
func isOtherQuantity(heading string) bool {
	s := strings.ToLower(normalize(strings.TrimSpace(heading)))
	name, unit := s, ""
	if i := strings.IndexAny(s, "/(["); i > 0 {
		name, unit = strings.TrimSpace(s[:i]), strings.Trim(s[i+1:], " )]")
		unit = strings.TrimLeft(unit, "([")
	}
	return otherNames[name] || otherUnits[unit]
}
