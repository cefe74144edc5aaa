package dataset

import (
	"errors"
	"strings"
	"testing"
)

// problemsOf reads a table that is refused.
func problemsOf(t *testing.T, text string, opt Options) Problems {
	t.Helper()
	_, err := Read("rates.csv", strings.NewReader(text), opt)
	var ps Problems
	if !errors.As(err, &ps) {
		t.Fatalf("%q is not refused: %v", text, err)
	}
	return ps
}

// noticed finds a notice by its code.
func noticed(t *testing.T, s *Set, code string) Notice {
	t.Helper()
	for _, n := range s.Notices {
		if n.Code == code {
			return n
		}
	}
	t.Fatalf("no notice %s among %v", code, codes(s))
	return Notice{}
}

func TestLostPowerIsRepeated(t *testing.T) {
	for heading, want := range map[string]string{"k/10-3 s-1": "10^-3", "10-12 k/s^-1": "10^-12", "105 k/s^-1": "10^5", "k/(10-3 s-1)": "10^-3"} {
		n := noticed(t, read(t, "T/K,"+heading+"\n280,1\n290,2\n", Options{}), noteLost)
		if n.Cure != "write "+want || !strings.Contains(n.Message, want) {
			t.Errorf("%s: %+v", heading, n)
		}
	}
}

// A power of ten that makes temperatures of no experiment is refused once, and the
// heading that would be right is named: 1000/3.5 = 285.7, 1/0.0035, 10000/35.
func TestWrongPowerOfTemperature(t *testing.T) {
	for _, c := range []struct{ heading, a, b, cure string }{
		{"10^-3 K/T", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"10-3 K/T", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"1/T (1/K)", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"1/T (1/K)", "35", "34", "write the heading as 10^4 K/T"},
		{"10^3/T", "0.0035", "0.0034", "write the heading as 1/T (1/K)"},
		{"10^3 T/K", "280", "290", "correct the power of ten"},
		{"T/K", "0.28", "0.29", "correct the power of ten"},
	} {
		ps := problemsOf(t, c.heading+",k/s^-1\n"+c.a+",1\n"+c.b+",2\n", Options{})
		if len(ps) != 1 || ps[0].Code != codeTFactor || ps[0].Column != c.heading || !strings.Contains(ps[0].Cure, c.cure) {
			t.Errorf("%s: %v", c.heading, ps)
		}
	}
	read(t, "T/mK,k/s^-1\n280,1\n290,2\n", Options{})
	read(t, "T/K,k/s^-1\n1.0,1\n2,2\n", Options{})
	read(t, "10^5 K/T,k/s^-1\n1.0,1\n2,2\n", Options{}) // 100 000 K
}
