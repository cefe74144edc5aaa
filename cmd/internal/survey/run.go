package survey

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"maps"
	"math"
	"os"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/workbook"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// Options say what a survey reads and how it judges.
type Options struct {
	Paths            []string // files, folders, patterns
	Include, Exclude []string // patterns of names below folders
	Sheet            string   // of workbooks; "" for all

	// Read says how files are read; LeaveOut, if not nil, which lines of each.
	Read     dataset.Options
	LeaveOut func(file string, all []string) []int
	// Assess says how data sets are judged; Seed is the master seed.
	Assess diagnostics.Options
	// FullNulls draws the nulls of every test to their end, as a single assessment
	// does. By default draws end once p is plainly not small.
	FullNulls bool

	Workers int // data sets at once; 0 for one a processor
	// K and N take part K of N, from 1; 0 of 0 takes all.
	K, N int
	// Progress, if not nil, is called now and then.
	Progress func(Progress)
	// Others, if not nil, is told which runs are at work on the store already.
	Others func([]Running)

	judge func(context.Context, *dataset.Set, diagnostics.Options) (*diagnostics.Assessment, error) // diagnostics.Assess if nil
}

// Check refuses what means nothing, before a store is made.
func (o *Options) Check() error { return checkPatterns(o.Include, o.Exclude) }

// Progress is how far a survey is.
type Progress struct {
	Sets     int     // found so far
	Assessed int     // in this run
	Read     float64 // share of the bytes of all files
	Elapsed  time.Duration
}

// Summary is what a run did.
type Summary struct {
	Files   int
	Skipped map[string]int // files passed over, by why
	Sets    int            // rows of all parts, failed ones included
	Mine    int            // rows of this part
	Known   int            // of them in the store before
	// Stored counts the rows that were written, Removed those of earlier runs whose
	// data are no longer in the files.
	Stored, Removed int
	Failed          int            // rows of this part with an error
	Errors          map[string]int // by code, of this part
	Complete        bool           // all was read and stored
}

// job is one data set on its way.
type job struct {
	entry Entry
	set   *dataset.Set // nil where the entry is complete
	seed  uint64
}

// runner carries one run.
type runner struct {
	opt     Options
	store   *Store // nil: only read
	summary Summary
	jobs    chan job
	entries chan Entry

	mu       sync.Mutex
	progress Progress

	seen   map[Key]bool // of the whole run
	inputs hash.Hash
	total  int64 // bytes
	before int64 // bytes of files that are done
}

// Run finds, assesses and stores data sets. What the store holds already is not done
// again. When ctx ends, the sets in hand are finished and stored, and the error is the
// cause. A nil store only reads and counts.
//
// The rows depend on the data and the settings alone: not on the number of workers,
// the order of the paths or the parts.
func Run(ctx context.Context, store *Store, opt Options) (*Summary, error) {
	if opt.N == 0 {
		opt.K, opt.N = 1, 1
	}
	if opt.K < 1 || opt.K > opt.N {
		return nil, fmt.Errorf("survey: there is no part %d of %d; parts count from 1", opt.K, opt.N)
	}
	if opt.Workers <= 0 {
		opt.Workers = runtime.GOMAXPROCS(0)
	}
	opt.Assess.Workers, opt.Assess.SequentialNull = 1, !opt.FullNulls
	if opt.Assess.Designs == nil { // archives repeat their temperatures
		opt.Assess.Designs = &diagnostics.DesignCache{Most: 64}
	}
	if opt.judge == nil {
		opt.judge = diagnostics.Assess
	}
	r := &runner{opt: opt, store: store, inputs: sha256.New(), seen: map[Key]bool{},
		jobs: make(chan job, 2*opt.Workers), entries: make(chan Entry, 2*batch),
		summary: Summary{Skipped: map[string]int{}, Errors: map[string]int{}}}
	files := finder{include: opt.Include, exclude: opt.Exclude}
	if err := files.find(opt.Paths); err != nil {
		return nil, err
	}
	r.summary.Skipped = files.skipped
	for _, f := range files.found {
		r.total += f.size
	}
	if store != nil {
		others, leave, err := store.enter()
		if err != nil {
			return nil, err
		}
		defer leave()
		if len(others) > 0 && opt.Others != nil {
			opt.Others(others)
		}
		store.forget(true)
		defer store.forget(false)
		if err := store.SetShard(Shard{K: opt.K, N: opt.N}); err != nil {
			return nil, err
		}
	}

	// An error of the store ends the run too.
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	var writing error
	written := make(chan struct{})
	go func() {
		defer close(written)
		if writing = r.write(); writing != nil {
			cancel(writing)
			for range r.entries { // let the workers end
			}
		}
	}()
	var workers sync.WaitGroup
	for range opt.Workers {
		workers.Go(r.work)
	}
	stop := r.report()
	err := r.readAll(ctx, files.found)
	close(r.jobs)
	workers.Wait()
	close(r.entries)
	<-written
	stop()
	if writing != nil {
		return &r.summary, writing
	}
	if err != nil {
		return &r.summary, err
	}
	r.summary.Complete = true
	if store == nil {
		return &r.summary, nil
	}
	if err := r.removeStale(&files); err != nil {
		return &r.summary, err
	}
	return &r.summary, store.SetShard(Shard{K: opt.K, N: opt.N, Sets: r.summary.Mine, Total: r.summary.Sets,
		Inputs: hex.EncodeToString(r.inputs.Sum(nil)), Done: true})
}

// readAll reads every file and hands out its data sets.
func (r *runner) readAll(ctx context.Context, files []source) error {
	var names []string
	if r.opt.LeaveOut != nil {
		for _, f := range files {
			names = append(names, f.path)
		}
	}
	for i := range files {
		if err := r.read(ctx, &files[i], names); err != nil {
			return err
		}
		r.mu.Lock()
		r.before += files[i].size
		r.mu.Unlock()
	}
	if r.summary.Sets == 0 && r.summary.Skipped[skippedLacking] > 0 {
		return r.opt.nowhere()
	}
	return nil
}

// nowhere says that no file holds what --dataset and --sheet ask for.
func (o *Options) nowhere() dataset.Problems {
	code, asked := "dataset-unknown", fmt.Sprintf("data set %q", o.Read.Dataset)
	switch {
	case o.Read.Dataset == "":
		code, asked = "sheet-unknown", fmt.Sprintf("sheet %q", o.Sheet)
	case o.Sheet != "":
		asked += fmt.Sprintf(" in a sheet %q", o.Sheet)
	}
	in := o.Paths[0]
	if n := len(o.Paths) - 1; n > 0 {
		in += fmt.Sprintf(" and %d more", n)
	}
	return dataset.Problems{{Code: code, File: in, Message: "no file has a " + asked,
		Cure: "onebarrier inspect FILE lists what a file has; leave the flag out to take all"}}
}

// lacks reports whether a file, or a sheet of it, is whole and holds nothing of what
// --dataset and --sheet ask for.
func (o *Options) lacks(ps dataset.Problems) bool {
	return len(ps) > 0 && !slices.ContainsFunc(ps, func(p dataset.Problem) bool {
		return !(p.Code == "dataset-unknown" && o.Read.Dataset != "" || p.Code == "sheet-unknown" && o.Sheet != "")
	})
}

// read reads one file. The error is one of the run, not of the file.
func (r *runner) read(ctx context.Context, f *source, names []string) error {
	r.summary.Files++
	lacking, before := false, r.summary.Sets
	hand := func(sheet string, found dataset.Found) error {
		if r.opt.lacks(found.Problems) {
			lacking = true
			return nil
		}
		return r.found(ctx, f, sheet, found)
	}
	defer func() {
		if lacking && r.summary.Sets == before {
			r.summary.Files--
			r.summary.Skipped[skippedLacking]++
		}
	}()
	if f.problem != nil {
		return hand("", dataset.Found{Problems: dataset.Problems{*f.problem}})
	}
	opt := r.opt.Read
	opt.Headings = f.settled
	if r.opt.LeaveOut != nil {
		opt.LeaveOut = r.opt.LeaveOut(f.path, names)
	}
	err := r.tables(f, opt, hand)
	var ps dataset.Problems
	if errors.As(err, &ps) {
		return hand("", dataset.Found{Problems: ps})
	}
	return err
}

// tables hands out the data sets of a file. What is wrong with the file as a whole is
// a dataset.Problems.
func (r *runner) tables(f *source, opt dataset.Options, hand func(string, dataset.Found) error) error {
	in, err := os.Open(f.path)
	if err != nil {
		return dataset.Problems{{Code: "read-failed", File: f.path, Message: reason(err).Error(), Cure: "check its name and your right to read it"}}
	}
	defer in.Close()
	start := make([]byte, 512)
	n, err := io.ReadFull(in, start)
	if err != nil && err != io.EOF && err != io.ErrUnexpectedEOF {
		return dataset.Problems{{Code: "read-failed", File: f.path, Message: reason(err).Error(), Cure: "check the disk"}}
	}
	// What is in a zip file stands at its end.
	if start = start[:n]; workbook.Is(start) || bytes.HasPrefix(start, []byte("PK\x03\x04")) {
		const most = 1 << 30
		if f.size > most {
			return dataset.Problems{{Code: "workbook-too-large", File: f.path, Message: fmt.Sprintf("the workbook has %d MB", f.size>>20), Cure: "save the sheet as CSV"}}
		}
		data, err := os.ReadFile(f.path)
		if err != nil {
			return dataset.Problems{{Code: "read-failed", File: f.path, Message: reason(err).Error(), Cure: "check the disk"}}
		}
		if workbook.Is(data) {
			return workbook.Each(f.path, data, r.opt.Sheet, opt, hand)
		}
	}
	if r.opt.Sheet != "" {
		return dataset.Problems{{Code: "sheet-unknown", File: f.path, Message: "--sheet " + r.opt.Sheet + ": a text table has no sheets", Cure: "leave out --sheet"}}
	}
	s, err := dataset.NewStream(f.path, &counted{ReadSeeker: in, r: r}, opt)
	for err == nil {
		var found dataset.Found
		if found, err = s.Next(); err == nil {
			err = hand("", found)
		}
	}
	if err == io.EOF {
		return nil
	}
	return err
}

// counted tells how far a file is read in its last pass.
type counted struct {
	io.ReadSeeker
	r     *runner
	seeks int
	at    int64
}

func (c *counted) Seek(offset int64, whence int) (int64, error) {
	c.seeks++
	c.at = 0
	return c.ReadSeeker.Seek(offset, whence)
}

func (c *counted) Read(b []byte) (int, error) {
	n, err := c.ReadSeeker.Read(b)
	if c.at += int64(n); c.seeks > 2 {
		c.r.mu.Lock()
		c.r.progress.Read = portion(c.r.before+c.at, c.r.total)
		c.r.mu.Unlock()
	}
	return n, err
}

func portion(part, all int64) float64 { return float64(part) / math.Max(1, float64(all)) }

// found takes a data set, or a problem, of a file.
func (r *runner) found(ctx context.Context, f *source, sheet string, found dataset.Found) error {
	if len(found.Problems) > 0 && found.Problems[0].Sheet != "" {
		sheet = found.Problems[0].Sheet
	}
	e := Entry{Position: found.Line, Row: emptyRow()}
	e.Row.Dataset, e.Row.SourceFile, e.Row.Sheet = found.Name, f.name(), sheet
	for n := 0; ; n++ { // two of one name in one sheet are told apart by their order
		e.Key = keyOf(e.Row.SourceFile, sheet, found.Name, n)
		if !r.seen[e.Key] {
			break
		}
	}
	r.seen[e.Key] = true
	e.Row.SetID = e.Key.String()
	if found.Set != nil {
		e.Content = contentOf(found.Set)
	} else {
		e.Content = problemsContent(found.Problems)
		if e.Position == 0 && len(found.Problems) > 0 {
			e.Position = found.Problems[0].Row
		}
	}
	r.inputs.Write(e.Key[:])
	r.inputs.Write(e.Content[:])
	r.summary.Sets++
	r.mu.Lock()
	r.progress.Sets++
	r.mu.Unlock()
	if !e.Key.part(r.opt.K, r.opt.N) {
		return nil
	}
	r.summary.Mine++
	if r.store == nil {
		if found.Set == nil {
			r.fail(&e, found.Problems)
		}
		return ctx.Err()
	}
	done, err := r.store.Done(e.Key, e.Content)
	if err != nil {
		return err
	}
	if done {
		r.summary.Known++
		if code := r.store.failed(e.Key); code != "" {
			r.mu.Lock()
			r.summary.Failed++
			r.summary.Errors[code]++
			r.mu.Unlock()
		}
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		return nil
	}
	j := job{entry: e}
	if found.Set == nil {
		r.fail(&j.entry, found.Problems)
	} else {
		j.set, j.seed = found.Set, seedOf(found.Set, r.opt.Assess.Seed)
	}
	select {
	case r.jobs <- j:
		return nil
	case <-ctx.Done():
		return context.Cause(ctx)
	}
}

// fail puts problems into a row and counts it.
func (r *runner) fail(e *Entry, ps dataset.Problems) {
	r.mu.Lock()
	defer r.mu.Unlock()
	e.Row.failed(ps)
	e.Assessment = problemsDocument(ps)
	r.summary.Failed++
	r.summary.Errors[e.Row.ErrorCode]++
}

// failed puts the first problem into a row, and counts the others.
func (r *Row) failed(ps dataset.Problems) {
	if len(ps) == 0 {
		ps = dataset.Problems{{Code: "failed", Message: "it is not known why"}}
	}
	p := ps[0]
	r.ErrorCode, r.Error = p.Code, p.Message
	if p.Code == "column-unknown" { // of one file that is right; here of many
		p.Cure += ", settle the headings of a folder in its " + ColumnsFile + ", or pass such files over with --exclude"
	}
	if p.Column != "" {
		r.Error = fmt.Sprintf("column %q: %s", p.Column, p.Message)
	}
	if cure := cureOf(&p); cure != "" {
		r.Error += "; " + cure
	}
	if len(ps) > 1 {
		r.Error += fmt.Sprintf(" (and %d more)", len(ps)-1)
	}
	if p.Row > 0 {
		r.ErrorRow = p.Row
	}
}

// work assesses data sets until there are no more.
func (r *runner) work() {
	var buf []byte
	for j := range r.jobs {
		if j.set != nil {
			r.assess(&j, &buf)
		}
		r.mu.Lock()
		r.progress.Assessed++
		r.mu.Unlock()
		r.entries <- j.entry
	}
}

// assess fills the entry of a data set. A fault of the program is an error of its row.
func (r *runner) assess(j *job, buf *[]byte) {
	defer func() {
		if v := recover(); v != nil {
			what, _, _ := strings.Cut(fmt.Sprint(v), "\n")
			j.entry.Assessment = nil
			row := emptyRow()
			row.SetID, row.Dataset, row.SourceFile, row.Sheet = j.entry.Row.SetID, j.entry.Row.Dataset, j.entry.Row.SourceFile, j.entry.Row.Sheet
			j.entry.Row = row
			r.fail(&j.entry, dataset.Problems{{Code: "internal-error", Message: "internal error: " + what, Cure: "please report it with the data"}})
		}
	}()
	opt := r.opt.Assess
	opt.Seed = j.seed
	// A set in hand is finished whatever becomes of the run.
	a, err := r.opt.judge(context.Background(), j.set, opt)
	var ps dataset.Problems
	switch {
	case errors.As(err, &ps):
	case err != nil:
		ps = dataset.Problems{{Code: "failed", Message: err.Error()}}
	}
	row := &j.entry.Row
	if err != nil {
		row.Points, row.Quantity, row.RateUnit = len(j.set.Points), j.set.Quantity.Symbol, j.set.Quantity.Unit
		row.LeftOut = row.Points - len(j.set.UsedPoints())
		r.fail(&j.entry, ps)
		return
	}
	row.assessed(a)
	if *buf, err = report.AppendJSON((*buf)[:0], a); err != nil {
		panic(err) // unknown numbers are null: a bug
	}
	j.entry.Assessment = bytes.Clone(*buf)
}

// Entries are written in transactions of so many, or what there is after so long.
const (
	batch     = 64
	batchTime = time.Second
)

// write stores entries until there are no more.
func (r *runner) write() error {
	var waiting []Entry
	tick := time.NewTicker(batchTime)
	defer tick.Stop()
	flush := func() error {
		if err := r.store.Put(waiting); err != nil {
			return err
		}
		r.mu.Lock()
		r.summary.Stored += len(waiting)
		r.mu.Unlock()
		clear(waiting)
		waiting = waiting[:0]
		return nil
	}
	for {
		select {
		case e, ok := <-r.entries:
			if !ok {
				if r.store == nil {
					return nil
				}
				return flush()
			}
			if waiting = append(waiting, e); len(waiting) < batch {
				continue
			}
		case <-tick.C:
		}
		if len(waiting) == 0 {
			continue
		}
		if err := flush(); err != nil {
			return err
		}
	}
}

// removeStale deletes rows of earlier runs whose files were read and no longer hold
// them.
func (r *runner) removeStale(files *finder) error {
	visited := maps.Clone(files.looked)
	for i := range files.found {
		visited[files.found[i].name()] = true
	}
	stale, err := r.store.without(r.seen, visited)
	if err != nil || len(stale) == 0 {
		return err
	}
	r.summary.Removed = len(stale)
	return r.store.Remove(stale)
}

// report calls Progress until it is stopped.
func (r *runner) report() (stop func()) {
	if r.opt.Progress == nil {
		return func() {}
	}
	begun := time.Now()
	tell := func() {
		r.mu.Lock()
		p := r.progress
		p.Read = math.Max(p.Read, portion(r.before, r.total))
		r.mu.Unlock()
		p.Elapsed = time.Since(begun)
		r.opt.Progress(p)
	}
	end, ended := make(chan struct{}), make(chan struct{})
	go func() {
		defer close(ended)
		tick := time.NewTicker(250 * time.Millisecond)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				tell()
			case <-end:
				return
			}
		}
	}()
	return func() { close(end); <-ended; tell() }
}

// keyOf names a data set: the same for every run, part and store. nth counts those of
// one name.
func keyOf(file, sheet, name string, nth int) Key {
	h := newHasher()
	h.text(file)
	h.text(sheet)
	h.text(name)
	h.number(uint64(nth))
	return Key(h.sum()[:len(Key{})])
}

// part reports whether a data set belongs to part k of n.
func (k Key) part(part, n int) bool {
	return binary.BigEndian.Uint64(k[:8])%uint64(n) == uint64(part-1)
}

// contentOf is a hash of everything of a data set that its assessment depends on, the
// sum of its file apart: a set is the same where a neighbour in its file changed.
func contentOf(s *dataset.Set) Content {
	h := newHasher()
	for i := range s.Points {
		p := &s.Points[i]
		h.point(p)
		h.number(uint64(p.Row))
		h.text(p.Column)
		h.text(p.WhyNot)
		h.real(p.Order)
	}
	q := &s.Quantity
	h.text(q.Symbol)
	h.text(q.Unit)
	h.real(q.LnPerSecond)
	h.truth(q.Known, q.Diffusion, q.PerMolecule, q.TimeLike)
	for _, c := range s.Columns {
		h.text(c.Heading)
		h.text(c.Role)
		h.text(c.Unit)
		h.real(c.Factor)
		h.text(c.Level)
	}
	for _, n := range s.Notices {
		h.text(n.Code)
		h.text(n.Message)
		h.text(n.Cure)
		for _, row := range n.Rows {
			h.number(uint64(row))
		}
	}
	for _, a := range s.Assumed {
		h.text(a)
	}
	return Content(h.sum()[:len(Content{})])
}

func problemsContent(ps dataset.Problems) Content {
	h := newHasher()
	for _, p := range ps {
		h.text(p.Code)
		h.number(uint64(p.Row))
		h.text(p.Column)
		h.text(p.Message)
		h.text(p.Cure)
	}
	return Content(h.sum()[:len(Content{})])
}

// seedOf is the seed of one data set: of its measurements and the master seed alone,
// not of names, lines or order among others.
func seedOf(s *dataset.Set, master uint64) uint64 {
	h := newHasher()
	h.number(master)
	for i := range s.Points {
		if p := &s.Points[i]; p.Used || p.Limit != "" {
			h.point(p)
		}
	}
	return binary.BigEndian.Uint64(h.sum())
}

// hasher hashes fields one after the other.
type hasher struct {
	b []byte
}

func newHasher() *hasher { return &hasher{make([]byte, 0, 2048)} }

func (h *hasher) text(s string) {
	h.number(uint64(len(s)))
	h.b = append(h.b, s...)
}
func (h *hasher) number(n uint64) { h.b = binary.LittleEndian.AppendUint64(h.b, n) }
func (h *hasher) real(x float64)  { h.number(math.Float64bits(x)) }
func (h *hasher) truth(all ...bool) {
	for _, t := range all {
		var b byte
		if t {
			b = 1
		}
		h.b = append(h.b, b)
	}
}

// point adds what was measured.
func (h *hasher) point(p *dataset.Point) {
	h.real(p.T)
	h.real(p.UT)
	h.real(p.K)
	h.real(p.UK)
	h.text(string(p.Level))
	h.real(p.SD)
	h.number(uint64(p.Repeats))
	h.text(p.Limit)
	h.text(p.Source)
	h.truth(p.Used)
}

func (h *hasher) sum() []byte {
	s := sha256.Sum256(h.b)
	return s[:]
}

// ErrorCodes lists the codes of a summary, the most frequent first.
func (s *Summary) ErrorCodes() []string {
	var codes []string
	for c := range s.Errors {
		codes = append(codes, c)
	}
	slices.SortFunc(codes, func(a, b string) int {
		if d := s.Errors[b] - s.Errors[a]; d != 0 {
			return d
		}
		return strings.Compare(a, b)
	})
	return codes
}
