package workbook

import (
	"archive/zip"
	"bufio"
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"path"
	"strconv"
	"strings"

	"onebarrier/models/dataset"
)

// The codes of what this package refuses and says; dataset explains them.
const (
	codeDamaged   = "workbook-damaged"
	codeTooLarge  = "workbook-too-large"
	codeEncrypted = "workbook-encrypted"
	codeFormat    = "workbook-format"
	codeSeveral   = "several-sheets"
	codeUnknown   = "sheet-unknown"
	codeScattered = "cells-scattered"
	codeDate      = "date-cell"
	codeFormula   = "formula-without-value"
	codeNoData    = "no-data"
	codeWide      = "too-many-columns"

	noteChosen  = "sheet-chosen"
	noteHidden  = "hidden-cells"
	notePercent = "percent-cells"
	noteMerged  = "merged-cells"
)

// What a file may unfold to: a workbook of numbers grows about tenfold. Beyond this
// it was made to fill memory.
const (
	growth    = 200
	leastSize = 64 << 20 // bytes, allowed to any file
	mostSize  = 2 << 30  // bytes, allowed to none
)

var errTooLarge = errors.New("the workbook unfolds to more than it may")

// book is an open workbook.
type book struct {
	name, sum string // as the user gave it; SHA-256 of the bytes
	parts     map[string]*zip.File
	limit     int64 // bytes that all parts may unfold to
	left      int64 // of limit
	sheets    []sheetInfo
	stringsAt string // part of the shared strings
	strings   []string
	formats   []format // by style
	from1904  bool     // days are counted from 1904-01-01
}

// sheetInfo is a worksheet in the list of the workbook.
type sheetInfo struct {
	name   string
	part   string
	hidden bool
}

// kind tells the files that this package answers for.
type kind int

const (
	notOurs kind = iota
	isXLSX
	isDamaged
	isODS
	isXLSB
	isOLE // .xls, or an encrypted workbook
)

// Is reports whether the bytes are those of a workbook: .xlsx, or a kind of
// spreadsheet file that Read refuses with its cure. The name of the file plays no
// part.
func Is(data []byte) bool { return kindOf(data) != notOurs }

func kindOf(data []byte) kind {
	if bytes.HasPrefix(data, []byte("\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1")) {
		return isOLE
	}
	if !bytes.HasPrefix(data, []byte("PK\x03\x04")) {
		return notOurs
	}
	// The type of an OpenDocument file stands uncompressed at its beginning.
	if bytes.Contains(data[:min(len(data), 200)], []byte("opendocument.spreadsheet")) {
		return isODS
	}
	z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		if bytes.Contains(data, []byte("[Content_Types].xml")) || bytes.Contains(data, []byte("xl/worksheets/")) {
			return isDamaged
		}
		return notOurs
	}
	found := notOurs
	for _, f := range z.File {
		switch p := partName(f.Name); {
		case p == "xl/workbook.bin":
			return isXLSB
		case strings.HasPrefix(p, "xl/"):
			found = isXLSX
		}
	}
	return found
}

// partName is how a part is looked up: names are not case-sensitive (ECMA-376-2,
// 6.2.2.3), and some programs write backslashes.
func partName(s string) string {
	return strings.ToLower(strings.TrimPrefix(strings.ReplaceAll(s, `\`, "/"), "/"))
}

// problem is one reason why a workbook, or a sheet of it, cannot be used.
func (b *book) problem(code, sheet string, row int, format string, args ...any) dataset.Problem {
	return dataset.Problem{Code: code, File: b.name, Sheet: sheet, Row: row,
		Message: fmt.Sprintf(format, args...), Cure: dataset.Explanations()[code].Cure}
}

func say(code string, rows []int, format string, args ...any) dataset.Notice {
	return dataset.Notice{Code: code, Message: fmt.Sprintf(format, args...), Cure: dataset.Explanations()[code].Cure, Rows: rows}
}

// open reads everything but the cells.
func open(name, sum string, data []byte) (*book, error) {
	b := &book{name: name, sum: sum, parts: map[string]*zip.File{}}
	refuse := func(code, format string, args ...any) (*book, error) {
		return nil, dataset.Problems{b.problem(code, "", 0, format, args...)}
	}
	switch kindOf(data) {
	case isOLE:
		// The stream of an encrypted package is named in UTF-16.
		if bytes.Contains(data, []byte("E\x00n\x00c\x00r\x00y\x00p\x00t\x00e\x00d\x00P\x00a\x00c\x00k\x00a\x00g\x00e\x00")) {
			return refuse(codeEncrypted, "the workbook is protected by a password")
		}
		return refuse(codeFormat, "this is a file of the old office format, such as .xls")
	case isODS:
		return refuse(codeFormat, "this is an OpenDocument spreadsheet (.ods)")
	case isXLSB:
		return refuse(codeFormat, "this is a binary workbook (.xlsb)")
	case isDamaged, notOurs:
		return refuse(codeDamaged, "the list of its parts cannot be read")
	}
	b.limit = min(max(growth*int64(len(data)), leastSize), mostSize)
	b.left = b.limit
	z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		return refuse(codeDamaged, "%v", err)
	}
	for _, f := range z.File {
		if _, twice := b.parts[partName(f.Name)]; !twice {
			b.parts[partName(f.Name)] = f
		}
	}
	if err := b.readIndex(); err != nil {
		return nil, b.failure(err, "")
	}
	return b, nil
}

// failure turns an error of reading parts into a problem.
func (b *book) failure(err error, sheet string) error {
	var ps dataset.Problems
	if errors.As(err, &ps) {
		return ps
	}
	if errors.Is(err, errTooLarge) {
		return dataset.Problems{b.problem(codeTooLarge, sheet, 0, "the workbook unfolds to more than %d MB", b.limit>>20)}
	}
	return dataset.Problems{b.problem(codeDamaged, sheet, 0, "the workbook cannot be read: %v", err)}
}

// bounded counts what is unfolded, of all parts together.
type bounded struct {
	r    io.Reader
	left *int64
}

func (r *bounded) Read(p []byte) (int, error) {
	if *r.left <= 0 {
		return 0, errTooLarge
	}
	if int64(len(p)) > *r.left {
		p = p[:*r.left]
	}
	n, err := r.r.Read(p)
	*r.left -= int64(n)
	return n, err
}

// handler takes the elements of a part, names without their prefix.
type handler interface {
	start(name string, attrs []xml.Attr) error
	text(s []byte)
	end(name string) error
}

// walk runs over the elements of a part. It reads to the end of the part, so that
// the checksum is verified.
func (b *book) walk(part string, h handler) error {
	f := b.parts[partName(part)]
	if f == nil {
		return fmt.Errorf("it has no part %s", strconv.Quote(part))
	}
	rc, err := f.Open()
	if err != nil {
		return fmt.Errorf("%s: %w", part, err)
	}
	defer func() { _ = rc.Close() }() // read to the end, or refused already
	r := bufio.NewReaderSize(&bounded{rc, &b.left}, 1<<16)
	d := xml.NewDecoder(r)
	depth, elements := 0, 0
	for {
		t, err := d.RawToken()
		if err == io.EOF {
			break
		}
		if err == nil {
			switch t := t.(type) {
			case xml.StartElement:
				depth++
				elements++
				err = h.start(t.Name.Local, t.Attr)
			case xml.EndElement:
				depth--
				err = h.end(t.Name.Local)
			case xml.CharData:
				h.text(t)
			}
		}
		if err != nil {
			return fmt.Errorf("%s: %w", part, err)
		}
	}
	if depth != 0 || elements == 0 {
		return fmt.Errorf("%s ends early", part)
	}
	return nil
}

func attr(attrs []xml.Attr, name string) string {
	for i := range attrs {
		if attrs[i].Name.Local == name {
			return attrs[i].Value
		}
	}
	return ""
}

// isTrue reads an xsd:boolean.
func isTrue(s string) bool { return s == "1" || s == "true" }

// reader makes a handler of what is done at the beginning of each element.
type reader func(name string, attrs []xml.Attr)

func (r reader) start(name string, attrs []xml.Attr) error { r(name, attrs); return nil }
func (reader) text([]byte)                                 {}
func (reader) end(string) error                            { return nil }

// relation is where a part refers to another, by an id.
type relation struct{ kind, target string }

// relations reads those of a part; a part may have none.
func (b *book) relations(part string) (map[string]relation, error) {
	m := map[string]relation{}
	dir := path.Dir(part)
	rels := path.Join(dir, "_rels", path.Base(part)+".rels")
	if part == "" {
		dir, rels = "", "_rels/.rels"
	}
	if b.parts[partName(rels)] == nil {
		return m, nil
	}
	err := b.walk(rels, reader(func(name string, attrs []xml.Attr) {
		if name != "Relationship" {
			return
		}
		target := strings.ReplaceAll(attr(attrs, "Target"), `\`, "/")
		if !strings.HasPrefix(target, "/") {
			target = path.Join(dir, target)
		}
		m[attr(attrs, "Id")] = relation{path.Base(attr(attrs, "Type")), strings.TrimPrefix(target, "/")}
	}))
	return m, err
}

// readIndex reads the list of sheets, the number formats and where the strings are.
func (b *book) readIndex() error {
	main := "xl/workbook.xml"
	top, err := b.relations("")
	if err != nil {
		return err
	}
	for _, r := range top {
		if r.kind == "officeDocument" && b.parts[partName(r.target)] != nil {
			main = r.target
		}
	}
	rels, err := b.relations(main)
	if err != nil {
		return err
	}
	styles := ""
	for _, r := range rels {
		switch {
		case b.parts[partName(r.target)] == nil:
		case r.kind == "styles":
			styles = r.target
		case r.kind == "sharedStrings":
			b.stringsAt = r.target
		}
	}
	if err := b.walk(main, reader(func(name string, attrs []xml.Attr) {
		switch name {
		case "workbookPr":
			b.from1904 = isTrue(attr(attrs, "date1904"))
		case "sheet":
			id := ""
			for _, a := range attrs {
				if a.Name.Local == "id" && a.Name.Space != "" { // r:id
					id = a.Value
				}
			}
			if r := rels[id]; r.kind == "worksheet" { // others hold charts
				state := attr(attrs, "state")
				b.sheets = append(b.sheets, sheetInfo{attr(attrs, "name"), r.target, state == "hidden" || state == "veryHidden"})
			}
		}
	})); err != nil {
		return err
	}
	if styles != "" {
		if err := b.readFormats(styles); err != nil {
			return err
		}
	}
	if len(b.sheets) == 0 {
		return dataset.Problems{b.problem(codeNoData, "", 0, "the workbook has no sheet of cells")}
	}
	return nil
}

// sharedStrings reads the texts that cells refer to, once.
func (b *book) sharedStrings() error {
	if b.stringsAt == "" {
		return nil
	}
	part := b.stringsAt
	b.stringsAt = ""
	return b.walk(part, &stringsReader{b: b})
}

type stringsReader struct {
	b *book
	t richText
}

func (r *stringsReader) start(name string, attrs []xml.Attr) error {
	if name == "si" {
		r.t.reset()
	}
	r.t.start(name, attrs)
	return nil
}

func (r *stringsReader) text(s []byte) { r.t.text(s) }

func (r *stringsReader) end(name string) error {
	r.t.end(name)
	if name == "si" {
		r.b.strings = append(r.b.strings, r.t.String())
	}
	return nil
}

// richText collects a text that may be made of runs. A raised exponent keeps its
// sense: s with a raised -1 is s^-1.
type richText struct {
	all, run                 []byte
	inText, phonetic, raised bool
}

func (t *richText) reset() { *t = richText{all: t.all[:0], run: t.run[:0]} }

func (t *richText) start(name string, attrs []xml.Attr) {
	switch name {
	case "t":
		t.inText = !t.phonetic
		t.run = t.run[:0]
	case "r":
		t.raised = false
	case "rPh":
		t.phonetic = true
	case "vertAlign":
		t.raised = attr(attrs, "val") == "superscript"
	}
}

func (t *richText) text(s []byte) {
	if t.inText {
		t.run = append(t.run, s...)
	}
}

func (t *richText) end(name string) {
	switch name {
	case "t":
		if !t.inText {
			return
		}
		t.inText = false
		if t.raised && len(t.all) > 0 && isExponent(string(t.run)) {
			t.all = append(t.all, '^')
		}
		t.all = append(t.all, t.run...)
	case "rPh":
		t.phonetic = false
	}
}

func (t *richText) String() string { return cleanText(string(t.all)) }

func isExponent(s string) bool {
	for _, sign := range []string{"-", "+", "−", "–"} {
		s = strings.TrimPrefix(s, sign)
	}
	if s == "" {
		return false
	}
	for _, r := range s {
		if r < '0' || r > '9' {
			return false
		}
	}
	return true
}

// cleanText undoes _xHHHH_ (ECMA-376-1, 22.9.2.19) and makes one line of the text.
func cleanText(s string) string {
	for from := 0; ; {
		i := strings.Index(s[from:], "_x")
		if i < 0 {
			break
		}
		i += from
		from = i + 1
		if len(s) < i+7 || s[i+6] != '_' {
			continue
		}
		if n, err := strconv.ParseUint(s[i+2:i+6], 16, 16); err == nil {
			s = s[:i] + string(rune(n)) + s[i+7:]
		}
	}
	if strings.ContainsAny(s, "\r\n\t") {
		return strings.Join(strings.Fields(s), " ")
	}
	return strings.TrimSpace(s)
}
