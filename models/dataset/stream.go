package dataset

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"hash/maphash"
	"io"
	"maps"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Found is one data set of a Stream, or why there is none.
type Found struct {
	// Name of the data set; NAME/HEADING where the table holds several rate
	// constants. "" where a problem concerns the whole table.
	Name     string
	Line     int // of its first row; 0 where Name is ""
	Set      *Set
	Problems Problems // Set is nil where there are any
}

// Stream reads the data sets of one table one after the other, each by itself: what
// is wrong with one does not touch the others. Columns of different rate constants
// give a data set each.
//
// Of a long text only the rows of one data set are held at a time, and those must
// follow one another. What concerns a text as a whole (its encoding, decimal mark
// and delimiter, which names come again) is found in a first pass over it.
type Stream struct {
	name string
	opt  Options

	head  *Table  // rows above the data and the first below them, for the headings
	plans []*plan // one for each rate constant; problems of the others are in ready
	after []int   // rows below a blank one
	width int     // of the rows

	ready []Found // to be handed out before the next rows are read
	rows  func() (r Row, blank, ok bool)
	next  []pending
	seen  map[uint64]bool
	again map[uint64]bool // names that come again after others
	whole bool            // everything is in ready
	used  map[int]bool    // lines of --leave-out that were found
	any   bool            // a data set was asked for and found
	zeros []bool
	read  *streamed
}

// pending is a row that was read ahead.
type pending struct {
	Row
	ok bool
}

// The largest text that is read as a whole; longer ones are streamed. Where the rows
// of data sets are mixed, a text up to mostSorted is sorted in memory.
const (
	mostWhole  = 1 << 20
	mostSorted = 32 << 20
	// Text that no data set tells apart must fit into memory.
	mostUndivided = 256 << 20
	headRows      = 256
	// mostRows is the number of rows that one data set may have in a stream. More
	// temperatures could not be assessed by far.
	mostRows   = 1 << 20
	chunk      = 256 << 10
	mostRecord = 16 << 20 // of a row with quoted line ends
)

var nameSeed = maphash.MakeSeed()

func hashName(s string) uint64 { return maphash.String(nameSeed, s) }

// NewStream begins to read a text table. name is the file name as the user gave it.
// Where the table cannot be used at all the error is a Problems.
func NewStream(name string, r io.ReadSeeker, opt Options) (*Stream, error) {
	size, err := r.Seek(0, io.SeekEnd)
	if err == nil {
		_, err = r.Seek(0, io.SeekStart)
	}
	if err != nil {
		return nil, readFailed(name, err)
	}
	undivided := false
	if size > mostWhole {
		s, err := newLong(name, r, size, opt)
		if !errors.Is(err, errWhole) {
			return s, err
		}
		undivided = errors.Is(err, errUndivided)
		if size > mostUndivided {
			return nil, Problems{problem(codeTooLong, name, 0, "", fmt.Sprintf("the file has %d MB, and no column tells its data sets apart, or it is not UTF-8", size>>20))}
		}
		if _, err := r.Seek(0, io.SeekStart); err != nil {
			return nil, readFailed(name, err)
		}
	}
	data, err := io.ReadAll(r)
	if err != nil {
		return nil, readFailed(name, err)
	}
	// A point takes ten times the memory of its row, and so many could not be assessed.
	if undivided && bytes.Count(data, []byte("\n")) > mostRows {
		return nil, Problems{problem(codeTooLong, name, 0, "", fmt.Sprintf("the file has more than %d rows, and no column tells its data sets apart", mostRows))}
	}
	t, err := ParseTable(name, data)
	if err != nil {
		return nil, err
	}
	return t.Stream(opt)
}

func readFailed(name string, err error) error {
	return Problems{problem(codeReadFailed, name, 0, "", err.Error())}
}

// errWhole says that a text cannot be streamed, errUndivided that this is since nothing
// tells data sets apart.
var (
	errWhole     = errors.New("dataset: to be read as a whole")
	errUndivided = fmt.Errorf("%w: one data set", errWhole)
)

// Stream gives the data sets of a table in memory one after the other.
func (t *Table) Stream(opt Options) (*Stream, error) {
	s := &Stream{name: t.Name, opt: opt, head: t}
	first, err := s.plan()
	if err != nil {
		return nil, err
	}
	if s.divided() == nil {
		s.readWhole(t)
		return s, nil
	}
	found := make([]marks, len(s.plans))
	rows := t.Rows
	for i := first; i < len(rows); i++ {
		if i > first && t.Blank[i] && !s.readsOn(rows[i].Cells) {
			for _, r := range rows[i:] {
				s.after = append(s.after, r.Line)
			}
			rows = rows[:i]
			break
		}
		for j, p := range s.plans {
			if t.mayHoldComma {
				found[j].look(p, rows[i])
			}
		}
	}
	s.decide(found)
	rows = s.sorted(rows[first:])
	s.rows = func() (r Row, blank, ok bool) {
		if len(rows) == 0 {
			return Row{}, false, false
		}
		r, rows = rows[0], rows[1:]
		return r, false, true
	}
	s.begin()
	return s, nil
}

// divided is the column that tells data sets apart, the same in every plan; nil if
// there is none, or the table was written by Tidy, whose columns need all of it.
func (s *Stream) divided() *column {
	if len(s.plans) == 0 {
		return nil
	}
	if row, leftOut := tidyMarks(s.plans[0].texts()); row >= 0 && leftOut >= 0 {
		return nil
	}
	return s.plans[0].dataset
}

// maker for a table of this stream, for the rate constant of one plan.
func (s *Stream) maker(t *Table, onlyRate string) *maker {
	return &maker{t: t, opt: s.opt, onlyRate: onlyRate}
}

// plan gives the headings their meaning, once for each rate constant. It returns the
// index of the first row of data in the head.
func (s *Stream) plan() (first int, err error) {
	m, p, first, conds := s.planOne("")
	groups := p.rateGroups()
	if len(groups) < 2 || !slices.ContainsFunc(m.problems, func(x Problem) bool { return x.Code == codeSeveralRates }) {
		if len(m.problems) > 0 {
			return first, m.problems
		}
		p.stream = planOfStream{conds: conds, line: m.line}
		s.plans = []*plan{p}
		return first, nil
	}
	base := s.head.baseName()
	for _, g := range groups {
		m, p, _, conds := s.planOne(g.key)
		if len(m.problems) > 0 {
			s.ready = append(s.ready, Found{Name: base + "/" + g.heading, Line: m.line, Problems: m.problems})
			continue
		}
		p.stream = planOfStream{conds: conds, line: m.line, group: g.key, suffix: "/" + g.heading}
		s.plans = append(s.plans, p)
	}
	return first, nil
}

// readsOn reports whether a row below a blank one goes on with the table.
func (s *Stream) readsOn(cells []string) bool {
	return slices.ContainsFunc(s.plans, func(p *plan) bool { return p.readsOn(cells, len(p.cols)) })
}

// planOfStream is what a plan needs besides to read data set by data set.
type planOfStream struct {
	conds  []condition
	line   int    // of the headings
	group  string // of the rate constant, where there are several
	suffix string // of the names of data sets, likewise
}

func (s *Stream) planOne(group string) (*maker, *plan, int, []condition) {
	m := s.maker(s.head, group)
	switch s.opt.Decimal {
	case "", "comma", "point":
	default:
		m.refuse(codeDecimalOption, 0, "", "--decimal %s", s.opt.Decimal)
	}
	headings, line, first, notices, ok := m.header()
	if !ok {
		return m, &plan{}, 0, nil
	}
	m.line = line
	p := m.columns(headings, line)
	p.notices = append(notices, p.notices...)
	if s.head.Encoding == "Windows-1252" {
		p.notices = append(p.notices, notice(noteEncoding, "the file is not UTF-8 and was read as Windows-1252"))
	}
	return m, p, first, m.conditions(p)
}

// rateGroup is a rate constant and the heading of its first column.
type rateGroup struct{ key, heading string }

// rateGroups lists the different rate constants in the columns of a table.
func (p *plan) rateGroups() []rateGroup {
	var groups []rateGroup
	for i := range p.cols {
		c := &p.cols[i]
		if c.Role != RoleRate || c.Ambiguity != nil {
			continue
		}
		if key := c.group(); !slices.ContainsFunc(groups, func(g rateGroup) bool { return g.key == key }) {
			groups = append(groups, rateGroup{key, c.Text})
		}
	}
	return groups
}

// decide settles the decimal mark of every plan, and refuses those where it is open.
func (s *Stream) decide(found []marks) {
	kept := s.plans[:0]
	for i, p := range s.plans {
		m := s.maker(s.head, p.stream.group)
		m.decideBy(p, &found[i])
		if len(m.problems) > 0 {
			f := Found{Problems: m.problems}
			if p.stream.suffix != "" {
				f.Name, f.Line = s.head.baseName()+p.stream.suffix, p.stream.line
			}
			s.ready = append(s.ready, f)
			continue
		}
		kept = append(kept, p)
	}
	s.plans = kept
}

// readWhole reads a table in which nothing tells data sets apart.
func (s *Stream) readWhole(t *Table) {
	s.whole = true
	for _, p := range s.plans {
		m := s.maker(t, p.stream.group)
		sets, err := m.all()
		var ps Problems
		if errors.As(err, &ps) {
			f := Found{Problems: ps}
			if p.stream.suffix != "" {
				f.Name, f.Line = t.baseName()+p.stream.suffix, p.stream.line
			}
			s.ready = append(s.ready, f)
		}
		for _, set := range sets {
			set.Name += p.stream.suffix
			f := Found{Name: set.Name, Set: set}
			if len(set.Points) > 0 {
				f.Line = set.Points[0].Row
			}
			s.ready = append(s.ready, f)
		}
	}
}

// sorted puts the rows of each data set together, in the order of their first rows.
func (s *Stream) sorted(rows []Row) []Row {
	if len(s.plans) == 0 {
		return nil
	}
	c := s.plans[0].dataset.index
	at := map[string]int{}
	var blocks [][]Row
	last, moved := "", false
	for i, r := range rows {
		name := last
		if len(r.Cells) == len(s.plans[0].cols) || i == 0 {
			name = nameIn(r.Cells, c)
		}
		j, known := at[name]
		if !known {
			j = len(blocks)
			at[name] = j
			blocks = append(blocks, nil)
		}
		moved = moved || j != len(blocks)-1
		blocks[j] = append(blocks[j], r)
		last = name
	}
	if !moved {
		return rows
	}
	out := make([]Row, 0, len(rows))
	for _, b := range blocks {
		out = append(out, b...)
	}
	return out
}

func nameIn(cells []string, column int) string {
	if column >= len(cells) {
		return ""
	}
	return strings.TrimSpace(cells[column])
}

// begin notes what is wrong with the table beside its data sets.
func (s *Stream) begin() {
	if len(s.plans) == 0 {
		return
	}
	if len(s.after) > 0 {
		s.ready = append(s.ready, Found{Problems: Problems{problem(codeBelowBlank, s.name, s.after[0], "", lines(s.after)+": below a blank row, not read")}})
		s.ready[len(s.ready)-1].Problems[0].Sheet = s.head.Sheet
	}
	s.used = map[int]bool{}
	s.next = []pending{s.pull(), s.pull()}
}

func (s *Stream) pull() pending {
	r, blank, ok := s.rows()
	if blank {
		ok = false // what is below is no part of the table, and was counted
	}
	return pending{r, ok}
}

// Next returns the next data set, or io.EOF.
func (s *Stream) Next() (Found, error) {
	for {
		if len(s.ready) > 0 {
			f := s.ready[0]
			s.ready = s.ready[1:]
			return f, nil
		}
		if s.whole || len(s.plans) == 0 {
			return Found{}, io.EOF
		}
		if !s.next[0].ok {
			s.whole = true
			s.finish()
			continue
		}
		if err := s.block(); err != nil {
			return Found{}, err
		}
	}
}

// finish tells what the flags named and the table does not hold.
func (s *Stream) finish() {
	m := s.maker(s.head, "")
	for _, l := range s.opt.LeaveOut {
		if !s.used[l] {
			m.refuse(codeLeaveOut, l, "", "--leave-out names a line that holds no row of data")
		}
	}
	if s.opt.Dataset != "" && !s.any {
		m.refuse(codeDatasetUnknown, 0, "", "there is no data set %q", s.opt.Dataset)
	}
	if s.read != nil {
		m.problems = append(m.problems, s.read.problems...)
	}
	if len(m.problems) > 0 {
		s.ready = append(s.ready, Found{Problems: m.problems})
	}
}

// block reads the rows of one data set and what they mean.
func (s *Stream) block() error {
	index, n := s.plans[0].dataset.index, len(s.plans[0].cols)
	name := nameIn(s.next[0].Cells, index)
	rows := make([]Row, 0, 16)
	tooMany := false
	for {
		if len(rows) < mostRows {
			rows = append(rows, s.next[0].Row)
		} else {
			tooMany = true
		}
		s.next[0], s.next[1] = s.next[1], s.pull()
		if !s.next[0].ok {
			break
		}
		now := nameIn(s.next[0].Cells, index)
		if now == name {
			continue
		}
		// A row with a cell too many or too few may have its name in another column.
		if len(s.next[0].Cells) != n && !(s.next[1].ok && nameIn(s.next[1].Cells, index) == now) {
			continue
		}
		break
	}
	for len(s.zeros) < len(rows) {
		s.zeros = append(s.zeros, make([]bool, len(rows))...)
	}
	t := *s.head
	t.Rows, t.Blank, t.first = rows, s.zeros[:len(rows)], nil
	label := name
	if label == "" {
		label = t.baseName()
	}
	if s.opt.Dataset != "" {
		if label != s.opt.Dataset {
			return nil
		}
		s.any = true
	}
	scattered := false
	if s.again != nil && s.again[hashName(name)] {
		if s.seen[hashName(name)] {
			return nil // told at its first row
		}
		s.seen[hashName(name)] = true
		scattered = true
	}
	for _, p := range s.plans {
		f := Found{Name: label + p.stream.suffix, Line: rows[0].Line}
		switch {
		case scattered:
			f.Problems = Problems{problem(codeDatasetScattered, t.Name, f.Line, "", fmt.Sprintf("rows of the data set %s stand below those of others", strconv.Quote(short(label))))}
		case tooMany:
			f.Problems = Problems{problem(codeTooLong, t.Name, f.Line, "", fmt.Sprintf("the data set %s has more than %d rows", strconv.Quote(short(label)), mostRows))}
		default:
			s.means(&f, p.clone(), &t, n)
		}
		for i := range f.Problems {
			f.Problems[i].Sheet = t.Sheet
		}
		if len(f.Problems) > 0 || f.Set != nil {
			s.ready = append(s.ready, f)
		}
	}
	return nil
}

// means gives the cells of one data set their meaning.
func (s *Stream) means(f *Found, p *plan, t *Table, n int) {
	m := s.maker(t, p.stream.group)
	m.line = p.stream.line
	m.opt.Dataset, m.opt.WhereMet = "", false // other data sets may meet it
	m.cutFootnotes(0, n)
	if len(s.opt.LeaveOut) > 0 {
		m.opt.LeaveOut = nil
		for _, r := range t.Rows {
			if slices.Contains(s.opt.LeaveOut, r.Line) {
				m.opt.LeaveOut = append(m.opt.LeaveOut, r.Line)
				s.used[r.Line] = true
			}
		}
	}
	m.chooseFirst(p, 0)
	p.settleQuantity()
	conds := p.stream.conds
	if len(conds) > 0 {
		conds = m.conditions(p)
	}
	points := m.points(p, conds, 0, n)
	sets := m.sets(p, points)
	if len(m.problems) > 0 {
		f.Problems = m.problems
		return
	}
	if len(sets) == 1 {
		f.Set = sets[0]
		f.Set.Name = f.Name
	}
}

// clone copies a plan, so that reading a data set leaves the plan as it is.
func (p *plan) clone() *plan {
	q := *p
	q.cols = slices.Clone(p.cols)
	at := func(c *column) *column {
		if c == nil {
			return nil
		}
		return &q.cols[c.index]
	}
	all := func(cs []*column) []*column {
		out := make([]*column, len(cs))
		for i, c := range cs {
			out[i] = at(c)
		}
		return out
	}
	q.temperature, q.kept = all(p.temperature), all(p.kept)
	q.runs = slices.Clone(p.runs)
	for i := range q.runs {
		r := &q.runs[i]
		r.cols, r.uncertainty, r.base = all(r.cols), at(r.uncertainty), at(r.base)
		r.factors = nil
	}
	q.ofT, q.repeats, q.coverage, q.limit = at(p.ofT), at(p.repeats), at(p.coverage), at(p.limit)
	q.source, q.dataset, q.order, q.note = at(p.source), at(p.dataset), at(p.order), at(p.note)
	q.assumed, q.notices = slices.Clone(p.assumed), slices.Clone(p.notices)
	q.student = maps.Clone(p.student)
	return &q
}

// newLong begins to stream a long text in UTF-8.
func newLong(name string, r io.ReadSeeker, size int64, opt Options) (*Stream, error) {
	in := &streamed{r: r, sum: sha256.New()}
	records, err := in.records(name)
	if err != nil {
		return nil, err
	}
	head := &Table{Name: name, Encoding: "UTF-8", Delimiter: records.delimiter}
	if ps := head.splitFirst(records, headRows); len(ps) > 0 {
		return nil, ps
	}
	s := &Stream{name: name, opt: opt, head: head}
	first, err := s.plan()
	if err != nil {
		// The end of the text may hold what the beginning lacks.
		return nil, err
	}
	dataset := s.divided()
	if dataset == nil {
		return nil, errUndivided
	}

	// First pass, over all of it.
	n, start := len(s.plans[0].cols), len(head.Rows)
	if first >= start {
		return nil, errWhole
	}
	line := head.Rows[first].Line
	found := make([]marks, len(s.plans))
	names := map[uint64]struct{}{}
	last, any := "", false
	look := func(r Row) {
		for j, p := range s.plans {
			found[j].look(p, r)
		}
		s.width = max(s.width, filledWidth(r.Cells))
		if len(r.Cells) != n && any {
			return
		}
		if now := nameIn(r.Cells, dataset.index); now != last || !any {
			h := hashName(now)
			if _, known := names[h]; known {
				if s.again == nil {
					s.again, s.seen = map[uint64]bool{}, map[uint64]bool{}
				}
				s.again[h] = true
			}
			names[h] = struct{}{}
			last, any = strings.Clone(now), true
		}
	}
	for i := first; i < len(head.Rows); i++ {
		if i > first && head.Blank[i] && !s.readsOn(head.Rows[i].Cells) {
			return nil, errWhole // a short table above something else
		}
		look(head.Rows[i])
	}
	for {
		cells, at, blank, ok, ps := records.row()
		if len(ps) > 0 {
			return nil, ps
		}
		if !ok {
			break
		}
		if len(s.after) > 0 || blank && !s.readsOn(cells) {
			s.after = append(s.after, at)
			continue
		}
		look(Row{at, cells})
	}
	if in.err != nil {
		return nil, readFailed(name, in.err)
	}
	if err := in.complain(name); err != nil {
		return nil, err
	}
	if s.again != nil && size <= mostSorted || s.width > n {
		return nil, errWhole
	}
	head.SHA256 = hex.EncodeToString(in.sum.Sum(nil))
	s.decide(found)

	// Second pass, from the first row of data.
	if _, err := r.Seek(0, io.SeekStart); err != nil {
		return nil, readFailed(name, err)
	}
	in = &streamed{r: r}
	if records, err = in.records(name); err != nil {
		return nil, err
	}
	s.read = in
	begun := false
	var all []string
	s.rows = func() (r Row, blank, ok bool) {
		for {
			cells, at, _, ok, ps := records.row()
			if !ok {
				in.problems = ps
				if in.err != nil {
					in.problems = Problems{problem(codeReadFailed, name, 0, "", in.err.Error())}
				}
				return Row{}, false, false
			}
			if begun = begun || at >= line; !begun {
				continue
			}
			if len(all)+len(cells) > cap(all) {
				all = make([]string, 0, max(1024, len(cells)))
			}
			from := len(all)
			all = append(all, cells...)
			return Row{at, all[from:len(all):len(all)]}, len(s.after) > 0 && at >= s.after[0], true
		}
	}
	s.begin()
	return s, nil
}

func filledWidth(cells []string) int {
	n := len(cells)
	for n > 0 && cells[n-1] == "" {
		n--
	}
	return n
}

// streamed reads a text piece by piece.
type streamed struct {
	r    io.Reader
	sum  hash.Hash // nil in the second pass
	tail []byte    // read, and behind the last line end
	end  bool
	err  error

	problems     Problems
	invalid, nul bool
	bytes        []byte
}

// records begins with the first piece of text.
func (x *streamed) records(name string) (*records, error) {
	first := &splitter{line: 1}
	x.more(first)
	if x.err != nil {
		return nil, readFailed(name, x.err)
	}
	text := first.s
	if strings.HasPrefix(text, "\xff\xfe") || strings.HasPrefix(text, "\xfe\xff") {
		return nil, errWhole
	}
	text = strings.TrimPrefix(text, "\uFEFF")
	if strings.HasPrefix(text, "PK\x03\x04") {
		return nil, Problems{problem(codeNotText, name, 0, "", "this is a workbook or another compressed file, not a text table")}
	}
	if what := markup(text); what != "" {
		return nil, Problems{problem(codeNotText, name, 0, "", "this is "+what+", not a table")}
	}
	r := newRecords(name, text)
	r.more = x.more
	return r, nil
}

// complain says why the whole text, once read, cannot be streamed.
func (x *streamed) complain(name string) error {
	switch {
	case x.invalid:
		return errWhole
	case x.nul:
		return Problems{problem(codeNotText, name, 0, "", "the file holds NUL bytes: it is not a text table, or it is UTF-16 without a byte order mark")}
	}
	return nil
}

// more adds a piece of text, up to a line end, to what is left.
func (x *streamed) more(p *splitter) bool {
	if x.end || len(p.s) > mostRecord {
		return false
	}
	for {
		from := len(p.s) + len(x.tail)
		size := from + max(chunk, len(p.s))
		if cap(x.bytes) < size {
			x.bytes = make([]byte, size)
		}
		b := x.bytes[:size]
		copy(b[copy(b, p.s):], x.tail)
		n, err := io.ReadFull(x.r, b[from:])
		switch err {
		case nil:
		case io.EOF, io.ErrUnexpectedEOF:
			x.end = true
		default:
			x.end, x.err = true, err
			return false
		}
		b = b[:from+n]
		if x.sum != nil {
			x.sum.Write(b[from:])
			x.nul = x.nul || bytes.IndexByte(b[from:], 0) >= 0
		}
		cut := len(b)
		if !x.end {
			if cut = bytes.LastIndexByte(b, '\n') + 1; cut == 0 && len(b) > 1 {
				cut = bytes.LastIndexByte(b[:len(b)-1], '\r') + 1
			}
		}
		added := string(b[:cut])
		// A line end is never inside a character, so that lines can be checked apart.
		if x.sum != nil && !x.invalid && !utf8.ValidString(added[len(p.s):]) {
			x.invalid = true
		}
		x.tail = append(x.tail[:0], b[cut:]...)
		if cut > len(p.s) {
			p.s = added
			return true
		}
		if x.end || len(x.tail) > mostRecord {
			return false
		}
	}
}

// heading gives a heading its meaning, which the user may have settled.
func (o *Options) heading(text string) Heading {
	if len(o.Headings) == 0 {
		return ParseHeading(text, o.Assume)
	}
	means, ok := o.Headings[NormalHeading(text)]
	if !ok {
		return ParseHeading(text, o.Assume)
	}
	h := ParseHeading(means, o.Assume)
	h.Text = text
	h.Assumed = append(h.Assumed, text+"="+means)
	return h
}

// NormalHeading is the spelling by which headings are compared.
func NormalHeading(text string) string { return normalize(strings.TrimSpace(text)) }
