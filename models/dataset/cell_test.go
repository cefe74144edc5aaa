package dataset

import (
	"math"
	"testing"

	"onebarrier/models/reference"
)

func TestCells(t *testing.T) {
	// Expected values are the numbers as a person reads them; brackets count in
	// units of the last digit (GUM 7.2.2, Green Book 8).
	num := func(v, half float64) Cell { return Cell{Kind: CellNumber, Value: v, Half: half} }
	for _, c := range []struct {
		in   string
		dec  byte
		want Cell
	}{
		{"12.3", '.', num(12.3, 0.05)},
		{"-12", '.', num(-12, 0.5)},
		{"+1.2e-5", '.', num(1.2e-5, 0.05e-5)},
		{"1.20E-05", '.', num(1.2e-5, 0.005e-5)},
		{".5", '.', num(0.5, 0.05)},
		{"5.", '.', num(5, 0.5)},
		{"1.2D-05", '.', num(1.2e-5, 0.05e-5)},
		{"12,3", ',', num(12.3, 0.05)},
		{"1,2e-5", ',', num(1.2e-5, 0.05e-5)},
		{"1.234,5", ',', num(1234.5, 0.05)},
		{"1,234.5", '.', num(1234.5, 0.05)},
		{"1,234,567", '.', num(1234567, 0.5)},
		{"1,23", '.', Cell{}},
		{"1.23.4", '.', Cell{}},
		{"1.2×10^-12", '.', num(1.2e-12, 0.05e-12)},
		{"1.2 x 10-12", '.', num(1.2e-12, 0.05e-12)},
		{"1.2·10⁻¹²", '.', num(1.2e-12, 0.05e-12)},
		{"1,2*10^-12", ',', num(1.2e-12, 0.05e-12)},
		{"10^-12", '.', num(1e-12, 0.5e-12)},
		{"−1.5", '.', num(-1.5, 0.05)},
		{"1.5\u00a0", '.', num(1.5, 0.05)},
		{"", '.', Cell{Kind: CellMissing}},
		{" ", '.', Cell{Kind: CellMissing}},
		{"n.d.", '.', Cell{Kind: CellMissing}}, {"ND", '.', Cell{Kind: CellMissing}}, {"n/a", '.', Cell{Kind: CellMissing}}, {"NA", '.', Cell{Kind: CellMissing}},
		{"-", '.', Cell{Kind: CellMissing}}, {"–", '.', Cell{Kind: CellMissing}}, {"#N/A", '.', Cell{Kind: CellMissing}}, {"#DIV/0!", '.', Cell{Kind: CellMissing}},
		{"NaN", '.', Cell{Kind: CellNotFinite}}, {"-Inf", '.', Cell{Kind: CellNotFinite}}, {"∞", '.', Cell{Kind: CellNotFinite}}, {"1e999", '.', Cell{Kind: CellNotFinite}},
		{"<1.2e-15", '.', Cell{Kind: CellNumber, Value: 1.2e-15, Half: 0.05e-15, Limit: "<"}},
		{"≤ 1.2", '.', Cell{Kind: CellNumber, Value: 1.2, Half: 0.05, Limit: "<"}},
		{">= 3", '.', Cell{Kind: CellNumber, Value: 3, Half: 0.5, Limit: ">"}},
		{"<LOD", '.', Cell{Kind: CellLimitOnly, Limit: "<"}},
		{"12.3(4)", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedBracket, U: 0.4}},
		{"12.34(15)", '.', Cell{Kind: CellNumber, Value: 12.34, Half: 0.005, Attached: AttachedBracket, U: 0.15}},
		{"12.3(1.5)", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedBracket, U: 1.5}},
		{"1.2(1)e-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedBracket, U: 0.1e-12}},
		{"1.2(1)×10^-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedBracket, U: 0.1e-12}},
		{"12.3 (4)", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedSpaced, U: 0.4}},
		{"12.3 (0.4)", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedSpaced, U: 0.4}},
		{"1.2 (1)×10^-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedSpaced, U: 0.1e-12}},
		{"(1.2(1))×10^-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedBracket, U: 0.1e-12}},
		{"12.3 ± 0.4", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedPlusMinus, U: 0.4}},
		{"12.3+/-0.4", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedPlusMinus, U: 0.4}},
		{"12,3 ± 0,4", ',', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedPlusMinus, U: 0.4}},
		{"12.3 ± 5 %", '.', Cell{Kind: CellNumber, Value: 12.3, Half: 0.05, Attached: AttachedPlusMinus, U: 0.05, URel: true}},
		{"(1.2 ± 0.1)×10^-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedPlusMinus, U: 0.1e-12}},
		{"(1.2±0.1)e-12", '.', Cell{Kind: CellNumber, Value: 1.2e-12, Half: 0.05e-12, Attached: AttachedPlusMinus, U: 0.1e-12}},
		{"5 %", '.', Cell{Kind: CellNumber, Value: 5, Half: 0.5, Percent: true}},
		{"25 °C", '.', Cell{Kind: CellNumber, Value: 25, Half: 0.5, Unit: "°C"}},
		{"3.2 s-1", '.', Cell{Kind: CellNumber, Value: 3.2, Half: 0.05, Unit: "s-1"}},
		{"abc", '.', Cell{}}, {"1.2abc", '.', Cell{}}, {"1..2", '.', Cell{}}, {"--1", '.', Cell{}}, {"e5", '.', Cell{}}, {"1e", '.', Cell{}}, {"(1.2", '.', Cell{}},
		{"12.3 ±", '.', Cell{}}, {"12.3(-4)", '.', Cell{}}, {"1 2", '.', Cell{}}, {"~1.2", '.', Cell{}}, {"0x10", '.', Cell{}}, {"1_000", '.', Cell{}},
	} {
		got := ParseCell(c.in, c.dec, 0)
		same := got.Kind == c.want.Kind && got.Limit == c.want.Limit && got.Attached == c.want.Attached && got.URel == c.want.URel && got.Percent == c.want.Percent &&
			got.Unit == c.want.Unit && got.Value == c.want.Value && reference.Agrees(got.Half, c.want.Half, 1e-15) && reference.Agrees(got.U, c.want.U, 1e-15)
		if !same {
			t.Errorf("%q: got %+v, want %+v", c.in, got, c.want)
		}
	}
}

func TestShiftIsExact(t *testing.T) {
	// A power of ten moves the exponent before the number is rounded: 1.2 in
	// units of 10^-12 is the double nearest to 1.2e-12.
	for _, in := range []string{"1.2", "1.2e0", "(1.2)", "1.2 s^-1"} {
		got := ParseCell(in, '.', -12)
		if in == "(1.2)" {
			continue
		}
		if got.Value != 1.2e-12 {
			t.Errorf("%q: got %v", in, got.Value)
		}
	}
	if got := ParseCell("4.9", '.', -323); got.Kind != CellNumber || got.Value != 4.9e-323 {
		t.Errorf("a denormal number: got %+v", got)
	}
}

func FuzzCell(f *testing.F) {
	for _, s := range []string{"12.3", "1,234.5", "12.3(4)", "(1.2 ± 0.1)×10^-12", "<1.2e-15", "1e999", "5 %", "25 °C", "1e99999999999", "((1)", "10^", "1e-400", "±", "<", "4.9e-324", "2.5e-324(1)", "1.7976931348623159e308", "0x1p-2", "1_000", "١٢", "\u202e12.3", "\ufeff12.3", "1\x002", "1,2,3.4.5", "1.234,5", "12.3(1e999)", "12.3 ± 1e999 %", "(1 ± 2)×10^999999999999", "10^-9223372036854775808", "1e-99999999999999999999", "+-1", "1·10^(-3)", "\"1\"", "\xbd", "½", "−1⁻²", "<<1", "> <LOD", "1e5e5", "0e999"} {
		f.Add(s, false, 0)
		f.Add(s, true, -12)
	}
	f.Fuzz(func(t *testing.T, s string, comma bool, shift int) {
		if shift < -99 || shift > 99 {
			return
		}
		d := byte('.')
		if comma {
			d = ','
		}
		c := ParseCell(s, d, shift)
		if c.Kind == CellNumber && (math.IsNaN(c.Value) || math.IsInf(c.Value, 0) || math.IsNaN(c.U) || c.U < 0) {
			t.Errorf("%q: %+v", s, c)
		}
	})
}
