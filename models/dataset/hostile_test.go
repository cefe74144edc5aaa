package dataset

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"maps"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"unicode/utf16"
)

// hostileRows is how often the pattern of a hostile file is repeated.
const hostileRows = 100_000

// hostileTable is a heading and lines of data; %d in a line is its number.
func hostileTable(heading, line string) []byte {
	var b bytes.Buffer
	b.WriteString(heading + "\n")
	for i := range hostileRows {
		b.WriteString(strings.ReplaceAll(line, "%d", strconv.Itoa(i)) + "\n")
	}
	return b.Bytes()
}

func utf16Text(s string, order binary.AppendByteOrder) []byte {
	b := order.AppendUint16(nil, 0xFEFF)
	for _, u := range utf16.Encode([]rune(s)) {
		b = order.AppendUint16(b, u)
	}
	return b
}

// Files too large for a corpus: each is read or refused with a Problems, in time,
// and allocates no more than a fixed amount and a multiple of its size. The
// multiple is what two Problems of a row of four bytes cost; a Point and its cells
// cost less.
func TestHostileFiles(t *testing.T) {
	const (
		fixed    = 16 << 20
		multiple = 500
	)
	const good = "T/K,k/s^-1\n300,1\n310,2\n"
	wide := strings.Repeat("a,", MostColumns-3)
	for name, c := range map[string]struct {
		data []byte
		read bool // else refused
		opt  Options
	}{
		"a million columns":              {data: []byte("T/K,k/s^-1" + strings.Repeat(",x", 1_000_000) + "\n300,1\n")},
		"a million empty columns":        {data: []byte("T/K,k/s^-1" + strings.Repeat(",", 1_000_000) + "\n300,1\n")},
		"a million tabs":                 {data: []byte(good + strings.Repeat("\t", 1_000_000)), read: true},
		"a line of 10 MB":                {data: []byte("T/K,k/s^-1\n300," + strings.Repeat("1", 10<<20) + "\n")},
		"a heading of 10 MB":             {data: []byte(strings.Repeat("T/K ", 10<<18) + ",k/s^-1\n300,1\n")},
		"a comment of 10 MB":             {data: []byte("#" + strings.Repeat("x", 10<<20) + "\n" + good), read: true},
		"a note of 10 MB":                {data: []byte("T/K,k/s^-1,note\n300,1," + strings.Repeat("x", 10<<20) + "\n310,2,\n"), read: true},
		"10 MB without a line":           {data: bytes.Repeat([]byte("3"), 10<<20)},
		"blank lines":                    {data: []byte(strings.Repeat("\n", 1<<20) + good), read: true},
		"blank lines in the middle":      {data: []byte("T/K,k/s^-1\n300,1\n" + strings.Repeat("\n", 1<<20) + "310,2\n"), read: true},
		"old line ends":                  {data: []byte(strings.ReplaceAll(string(hostileTable("T/K,k/s^-1", "3%d,1.5")), "\n", "\r")), read: true},
		"a quote never closed":           {data: []byte("T/K,k/s^-1\n300,\"" + strings.Repeat("1\n", 1<<20))},
		"doubled quotes":                 {data: []byte("T/K,k/s^-1,note\n300,1,\"" + strings.Repeat(`""`, 1<<20) + "\"\n"), read: true},
		"nested quotes":                  {data: hostileTable("T/K,k/s^-1,note", `3%d,1,"a""b"c"d`), read: true},
		"NUL":                            {data: append([]byte(good), make([]byte, 1<<20)...)},
		"UTF-16 without a mark":          {data: utf16Text(good, binary.LittleEndian)[2:]},
		"UTF-16 with half a letter":      {data: append(utf16Text(good, binary.LittleEndian), 'x'), read: true},
		"UTF-16, big end first":          {data: utf16Text(good, binary.BigEndian), read: true},
		"UTF-16, lone surrogates":        {data: utf16Text(strings.Repeat("\uFFFD", 1<<20), binary.BigEndian)},
		"Windows-1252":                   {data: append([]byte("t/\xb0C,k/s^-1,note\n25,1,"), bytes.Repeat([]byte{0x81, 0x96}, 1<<20)...), read: true},
		"byte order marks":               {data: []byte(strings.Repeat("\uFEFF", 1<<20) + good), read: true},
		"right to left":                  {data: hostileTable("T/K,k/s^-1,source", "3%d,1,\u202eعربي %d"), read: true},
		"mixed decimal marks":            {data: hostileTable("T/K;k/s^-1", "3%d,5;1.5e-3")},
		"beyond float64":                 {data: hostileTable("T/K,k/s^-1", "3%d,1e999")},
		"denormal":                       {data: hostileTable("T/K,k/s^-1", "3%d,4.9e-324"), read: true},
		"a fault in every row":           {data: hostileTable("T/K,k/s^-1", "x,y")},
		"ragged":                         {data: hostileTable("T/K,k/s^-1", "1,2,3")},
		"no k":                           {data: hostileTable("T/K,k/s^-1", "3%d,"), read: true},
		"brackets":                       {data: hostileTable("T/K,k/s^-1", "3%d,12.3(4)"), read: true},
		"limits":                         {data: hostileTable("T/K,k/s^-1", "3%d,<1"), read: true},
		"the same row":                   {data: hostileTable("T/K,k/s^-1", "300,1"), read: true},
		"a data set a row":               {data: hostileTable("T/K,k/s^-1,dataset", "3%d,1,%d"), read: true},
		"a data set a row, with notices": {data: hostileTable("T/K,k/s^-1,dataset", "3%d,1.5(2),%d"), read: true},
		"a source a row":                 {data: hostileTable("T/K,k/s^-1,source", "3%d,1,%d"), read: true},
		"many kept columns":              {data: []byte("T/K,k/s^-1," + wide + "\n" + strings.Repeat("300,1,"+strings.Repeat("1,", MostColumns-3)+"\n", 20))},
		"different kept columns":         {data: manyColumns(200), read: true},
		"left out, line by line":         {data: hostileTable("T/K,k/s^-1", "3%d,1"), read: true, opt: Options{LeaveOut: manyLines(hostileRows / 2)}},
		"lines that do not exist":        {data: []byte(good), opt: Options{LeaveOut: manyLines(hostileRows)}},
	} {
		t.Run(name, func(t *testing.T) {
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			sets, err := Read("hostile.csv", bytes.NewReader(c.data), c.opt)
			runtime.ReadMemStats(&after)
			size := len(c.data) + 8*len(c.opt.LeaveOut)
			used := after.TotalAlloc - before.TotalAlloc
			t.Logf("%d kB, %d times its size allocated", size>>10, used/uint64(size))
			if !raceDetector && used > fixed+multiple*uint64(size) {
				t.Errorf("%d bytes allocated for %d bytes", used, size)
			}
			var ps Problems
			switch {
			case err == nil && len(sets) == 0:
				t.Error("neither sets nor problems")
			case err != nil && (!errors.As(err, &ps) || len(ps) == 0):
				t.Errorf("%T %v", err, err)
			case (err == nil) != c.read:
				t.Errorf("read: %v, %.300v", err == nil, err)
			}
			if text := ps.Error(); len(text) > 1<<16 {
				t.Errorf("the message has %d bytes: %.200s", len(text), text)
			}
		})
	}
}

// manyColumns is a table with n columns that are kept, each with another heading.
func manyColumns(n int) []byte {
	var head, row strings.Builder
	head.WriteString("T/K,k/s^-1")
	row.WriteString("300,1")
	for i := range n {
		fmt.Fprintf(&head, ",x%d", i)
		row.WriteString(",1")
	}
	return []byte(head.String() + "\n" + strings.Repeat(row.String()+"\n", 2000))
}

func manyLines(n int) []int {
	lines := make([]int, n)
	for i := range lines {
		lines[i] = i + 2
	}
	return lines
}

// With several data sets a notice goes to the sets whose rows it names.
func TestNoticesOfSeveralSets(t *testing.T) {
	sets, err := Read("x.csv", strings.NewReader("a title\nT/K,k/s^-1,dataset\n300,1,a\n310,2.0(1),b\n320,3.0(1),a\n330,,a\n"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	got := map[string]string{}
	for _, s := range sets {
		for _, n := range s.Notices {
			if len(n.Rows) > 0 {
				got[s.Name] += fmt.Sprint(n.Code, n.Rows, " ")
				if n.Code == noteBrackets && !strings.HasPrefix(n.Message, lines(n.Rows)) {
					t.Errorf("%s: %s", s.Name, n.Message)
				}
			}
		}
	}
	title := noteTitle + "[1] "
	want := map[string]string{"a": title + noteBrackets + "[5] " + noteMissing + "[6] ", "b": title + noteBrackets + "[4] "}
	if !maps.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}
