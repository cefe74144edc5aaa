package survey

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
)

// Failed names, among the states of a filter, the data sets that could not be used.
const Failed = "failed"

// TableOptions choose and order the rows of a table. The zero value gives all rows in
// the order of the store: source file, sheet, place in it.
type TableOptions struct {
	States    []string // any of these, Failed among them; all if empty
	MaxQ      float64  // largest q_value; 0 takes all, those without one too
	MaxQBand  float64  // largest q_band, likewise
	MinPoints int
	// Without are codes of warnings: data sets that have one of them are left out.
	Without []string
	// Sort is the name of a column, or what the text table calls it; unknown values
	// come last either way, and rows that are equal in it keep the order of the store.
	Sort       string
	Descending bool
}

// Check reports the first option that is not possible, and what would be.
func (o TableOptions) Check() error {
	for _, s := range o.States {
		if s != Failed && !slices.Contains(diagnostics.States, diagnostics.State(s)) {
			return fmt.Errorf("survey: %q is not a verdict; use %s", s, strings.Join(TableStates(), ", "))
		}
	}
	for _, q := range []float64{o.MaxQ, o.MaxQBand} {
		if !(q >= 0 && q <= 1) {
			return fmt.Errorf("survey: the largest q is %g; give a number above 0, up to 1", q)
		}
	}
	switch {
	case o.MinPoints < 0:
		return fmt.Errorf("survey: the least number of points is %d; give 0 or more", o.MinPoints)
	case o.Sort != "" && !slices.Contains(columns, SortColumn(o.Sort)):
		return fmt.Errorf("survey: %q is not a column; use one of %s", o.Sort, strings.Join(columns, ", "))
	}
	return nil
}

// TableStates lists what a filter of states knows.
func TableStates() []string {
	var names []string
	for _, s := range diagnostics.States {
		names = append(names, string(s))
	}
	return append(names, Failed)
}

// headings are what the text table calls columns.
var headings = map[string]string{
	"data set": "dataset", "n": "points", "verdict": "state", "δe": "e_change_kj_per_mol",
	"de": "e_change_kj_per_mol", "interval": "e_change_lower", "q": "q_value", "q band": "q_band", "p": "p_value",
}

// SortColumn is the column that a heading of the text table stands over; any other
// name is given back.
func SortColumn(name string) string {
	heading := strings.ToLower(name)
	if strings.HasSuffix(heading, " interval") { // 95 % interval
		heading = "interval"
	}
	if c := headings[heading]; c != "" {
		return c
	}
	return name
}

// ofBand reports whether q_band, not q_value, is what a table is about.
func (o TableOptions) ofBand() bool { return o.MaxQBand > 0 || SortColumn(o.Sort) == "q_band" }

// order is the ORDER BY of the rows.
func (o TableOptions) order() string {
	if o.Sort == "" {
		return "ORDER BY " + order
	}
	// q never falls where p rises, so the stored p sorts what is not stored.
	column := SortColumn(o.Sort)
	if p := map[string]string{"q_value": "p_value", "q_band": "p_band"}[column]; p != "" {
		column = p
	}
	direction := ""
	if o.Descending {
		direction = " DESC"
	}
	return fmt.Sprintf("ORDER BY %[1]s IS NULL OR %[1]s = '', %[1]s%[2]s, %[3]s", column, direction, order)
}

// chooses reports whether a row, its q known, passes the filters.
func (o TableOptions) chooses(r *Row) bool {
	if len(o.States) > 0 {
		state := r.State
		if r.ErrorCode != "" {
			state = Failed
		}
		if !slices.Contains(o.States, state) {
			return false
		}
	}
	if o.MaxQ > 0 && !(r.QValue <= o.MaxQ) {
		return false
	}
	if o.MaxQBand > 0 && !(r.QBand <= o.MaxQBand) {
		return false
	}
	if len(o.Without) > 0 && r.hasWarning(o.Without) != "" {
		return false
	}
	return o.MinPoints == 0 || r.Points >= o.MinPoints
}

// hasWarning is the first of some codes that is among the warnings, "" if none is.
func (r *Row) hasWarning(codes []string) string {
	for w := range strings.FieldsSeq(r.Warnings) {
		if slices.Contains(codes, w) {
			return w
		}
	}
	return ""
}

// Tally counts what a table was made from.
type Tally struct {
	Sets      int // rows of the store
	Shown     int // rows that passed the filters
	Testable  int // sets that q is computed over
	Found     int // testable sets with q_value ≤ MaxQ or UsualQ, before the filters
	FoundBand int // testable sets with q_band ≤ MaxQBand or UsualQ, likewise
	Failed    int // sets that could not be used
}

// UsualQ is the false discovery share at which a tally counts where no other is asked.
const UsualQ = 0.05

// Table calls fn with the rows that the options choose, q_value and q_band filled in.
// q is over all testable sets of the store, whatever the filters. Beside two numbers a
// testable set no row is kept.
func (s *Store) Table(ctx context.Context, o TableOptions, fn func(*Row) error) (Tally, error) {
	var n Tally
	if err := o.Check(); err != nil {
		return n, err
	}
	p, band, err := s.falseDiscoveries(ctx)
	if err != nil {
		return n, err
	}
	err = s.query(ctx, false, o.order(), func(e Entry) error {
		r := &e.Row
		n.Sets++
		if r.Testable() {
			r.QValue, r.QBand = p.of(r.PValue), band.of(r.PBand)
			n.Testable++
			if r.QValue <= cmp.Or(o.MaxQ, UsualQ) {
				n.Found++
			}
			if r.QBand <= cmp.Or(o.MaxQBand, UsualQ) {
				n.FoundBand++
			}
		}
		if r.ErrorCode != "" {
			n.Failed++
		}
		if !o.chooses(r) {
			return nil
		}
		n.Shown++
		return fn(r)
	})
	return n, err
}

// TableFormats lists the forms of a table.
var TableFormats = []string{"text", "csv", "parquet", "jsonl"}

// tableWriter is one form of a table.
type tableWriter interface {
	begin() error
	row(*Row) error
	end(Tally) error
}

// WriteTable writes the rows that the options choose in one of TableFormats; layout is
// for text. A row is written as soon as it is read.
func (s *Store) WriteTable(ctx context.Context, w io.Writer, format string, o TableOptions, layout report.Text) error {
	if err := o.Check(); err != nil {
		return err
	}
	standing, err := s.Standing(ctx)
	if err != nil {
		return err
	}
	var t tableWriter
	switch format {
	case "", "text":
		text := newTextTable(w, layout, s.Confidence())
		text.asked, text.standing = o, standing
		if text.shared, err = s.sharedNames(ctx); err != nil {
			return err
		}
		t = text
	case "csv":
		t = newCSVTable(w)
	case "parquet":
		t = newParquetTable(w, standing.Complete())
	case "jsonl":
		t = newJSONLines(w, standing.Complete())
	default:
		return fmt.Errorf("survey: %q is not a form of a table; use %s", format, strings.Join(TableFormats, ", "))
	}
	if err := t.begin(); err != nil {
		return err
	}
	n, err := s.Table(ctx, o, t.row)
	if err != nil {
		return err
	}
	return t.end(n)
}

// Confidence is the level of the intervals of the store, as the flag spells it.
func (s *Store) Confidence() string {
	if c := s.settings["confidence"]; c != "" {
		return c
	}
	return fmt.Sprint(diagnostics.DefaultOptions().Confidence)
}

func known(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
