package dataset

import (
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// k from k/T: products worked out by hand; k_B/h = 1.380649e-23/6.62607015e-34 =
// 2.083661912333e10 s^-1 K^-1 (SI Brochure 2019, exact constants).
func TestDivided(t *testing.T) {
	const kBh = 1.380649e-23 / 6.62607015e-34
	for _, c := range []struct {
		text string
		k, u float64
	}{
		{"T/K,k/T (s-1 K-1)\n300,2e-6\n310,4e-6\n", 6e-4, 0},
		{"T/K,k/T (s-1 K-1),u(k)/s^-1\n300,2e-6,3e-5\n310,4e-6,3e-5\n", 6e-4, 3e-5},
		{"T/K,k/T (s-1 K-1),u(k/T)/s^-1 K^-1\n300,2e-6,1e-7\n310,4e-6,1e-7\n", 6e-4, 3e-5},
		{"T/K,k/T (s-1 K-1),SE (s-1)\n300,2e-6,3e-5\n310,4e-6,3e-5\n", 6e-4, 3e-5},
		{"T/K,k/T (s-1 K-1),SE (s-1 K-1)\n300,2e-6,1e-7\n310,4e-6,1e-7\n", 6e-4, 3e-5},
		{"T/K,k/T (s-1 K-1),u_r(k)/%\n300,2e-6,5\n310,4e-6,5\n", 6e-4, 3e-5},
		{"T/K,k/T (s-1 K-1)\n300,2.0(1)e-6\n310,4.0(1)e-6\n", 6e-4, 3e-5},
		{"T/K,ln(k/T),SE\n300,0,0.05\n310,1,0.05\n", 300, 15},
		{"T/K,lg(k/T)\n300,-2\n310,1\n", 3, 0},
		{"T/K,ln(k h/(k_B T))\n300,0\n310,1\n", kBh * 300, 0},
		{"t/°C,T/K,k/s^-1,ln(k/T)\n26.85,300.00,300.000,0.000\n36.85,310.00,842.668,1.000\n", 300, 0}, // 310 e
	} {
		s := read(t, c.text, Options{})
		p := s.Points[0]
		if !reference.Agrees(p.K, c.k, 1e-12) || !reference.Agrees(p.UK, c.u, 1e-12) {
			t.Errorf("%q: k %v, u %v; want %v, %v", c.text, p.K, p.UK, c.k, c.u)
		}
	}
	_, err := Read("rates.csv", strings.NewReader("T/K,k/s^-1,ln(k/T)\n300,300,0\n310,842.668,1.1\n"), Options{})
	if err == nil || !strings.Contains(err.Error(), "column \"ln(k/T)\"") {
		t.Errorf("k and ln(k/T) that disagree: %v", err)
	}
}
