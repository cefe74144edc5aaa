package cli

import (
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// choice is the value of a flag that takes one of a few words.
type choice struct {
	value *string
	words []string
}

func (c *choice) String() string { return *c.value }
func (c *choice) Type() string   { return strings.Join(c.words, "|") }
func (c *choice) Set(s string) error {
	if !slices.Contains(c.words, s) {
		cure := "use one of " + strings.Join(c.words, ", ")
		if near := closest(s, c.words); near != "" {
			cure = fmt.Sprintf("did you mean %q?", near)
		}
		return fmt.Errorf("%q is not known; %s", s, cure)
	}
	*c.value = s
	return nil
}

// temperature is the value of a flag that takes a temperature with its unit.
type temperature struct{ kelvin *float64 }

func (t temperature) String() string {
	if *t.kelvin == 0 {
		return ""
	}
	return strconv.FormatFloat(*t.kelvin, 'g', -1, 64) + "K"
}
func (t temperature) Type() string { return "temperature" }
func (t temperature) Set(s string) error {
	k, err := parseTemperature(s)
	if err == nil {
		*t.kelvin = k
	}
	return err
}

// parseTemperature reads 195K, 25degC, 25°C or 77degF into kelvin. A number
// without a unit is refused: it could mean any of them.
func parseTemperature(s string) (float64, error) {
	const cure = "write it with its unit, such as 298.15K, 25degC or 77degF"
	s = strings.TrimSpace(strings.ReplaceAll(s, "−", "-"))
	for _, u := range []struct {
		name   string
		kelvin func(float64) float64
	}{
		{"degC", func(x float64) float64 { return x + 273.15 }},
		{"°C", func(x float64) float64 { return x + 273.15 }},
		{"℃", func(x float64) float64 { return x + 273.15 }},
		{"degF", func(x float64) float64 { return (x + 459.67) * 5 / 9 }},
		{"°F", func(x float64) float64 { return (x + 459.67) * 5 / 9 }},
		{"K", func(x float64) float64 { return x }},
		{"C", func(x float64) float64 { return x + 273.15 }},
		{"F", func(x float64) float64 { return (x + 459.67) * 5 / 9 }},
	} {
		number, ok := strings.CutSuffix(s, u.name)
		if !ok {
			continue
		}
		x, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
		if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
			return 0, fmt.Errorf("%q is not a temperature; %s", s, cure)
		}
		if k := u.kelvin(x); k > 0 {
			return k, nil
		}
		return 0, fmt.Errorf("%q is not above absolute zero", s)
	}
	return 0, fmt.Errorf("%q has no unit of temperature; %s", s, cure)
}

// band is the value of --prefactor-band: two exponents, 0..1.
type band struct{ ends *[2]float64 }

func (b band) String() string { return fmt.Sprintf("%g..%g", b.ends[0], b.ends[1]) }
func (b band) Type() string   { return "low..high" }
func (b band) Set(s string) error {
	ends, err := diagnostics.ParseBand(s)
	if err != nil {
		return errors.New(strings.TrimPrefix(err.Error(), "diagnostics: "))
	}
	*b.ends = ends
	return nil
}

// pairs is the value of --assume: key=value, repeated or separated by commas.
type pairs struct{ m *map[string]string }

func (p pairs) String() string { return strings.Join(p.GetSlice(), ",") }
func (p pairs) Type() string   { return "key=value" }

// GetSlice, Append and Replace make it a pflag.SliceValue.
func (p pairs) GetSlice() []string {
	var out []string
	for _, key := range slices.Sorted(maps.Keys(*p.m)) {
		out = append(out, key+"="+(*p.m)[key])
	}
	return out
}
func (p pairs) Append(s string) error { return p.Set(s) }
func (p pairs) Replace(all []string) error {
	*p.m = nil
	for _, s := range all {
		if err := p.Set(s); err != nil {
			return err
		}
	}
	return nil
}

func (p pairs) Set(s string) error {
	if *p.m == nil {
		*p.m = map[string]string{}
	}
	for _, part := range strings.Split(s, ",") {
		key, value, ok := strings.Cut(part, "=")
		key, value = strings.TrimSpace(key), strings.TrimSpace(value)
		if !ok || key == "" || value == "" {
			return fmt.Errorf("%q is not of the form key=value, such as T=degC", part)
		}
		if !slices.Contains(dataset.AssumptionKeys, key) {
			if near := closest(key, dataset.AssumptionKeys); near != "" && len(key) > 1 {
				return fmt.Errorf("%q is nothing to assume; did you mean %s=%s?", key, near, value)
			}
			return fmt.Errorf("%q is nothing to assume; %s", key, dataset.Explanations()["assumption-not-understood"].Cure)
		}
		(*p.m)[key] = value
	}
	return nil
}

// column is the value of --column: role=HEADING, where a heading may hold commas. A
// role given several times has several headings.
type column struct{ m *map[string][]string }

func (c column) String() string { return strings.Join(c.GetSlice(), ",") }

// GetSlice lists the columns as a user may repeat them.
func (c column) GetSlice() []string {
	var chosen []string
	for _, role := range slices.Sorted(maps.Keys(*c.m)) {
		for _, heading := range (*c.m)[role] {
			chosen = append(chosen, role+"="+heading)
		}
	}
	return chosen
}

// Append and Replace make it a pflag.SliceValue.
func (c column) Append(s string) error { return c.Set(s) }
func (c column) Replace(all []string) error {
	*c.m = nil
	for _, s := range all {
		if err := c.Set(s); err != nil {
			return err
		}
	}
	return nil
}

func (c column) Type() string { return "role=heading" }
func (c column) Set(s string) error {
	role, heading, ok := strings.Cut(s, "=")
	if !ok || strings.TrimSpace(role) == "" || strings.TrimSpace(heading) == "" {
		return fmt.Errorf("%q is not of the form role=HEADING, such as 'k=k_obs/s^-1'; %s", s, dataset.Explanations()["role-unknown"].Cure)
	}
	if *c.m == nil {
		*c.m = map[string][]string{}
	}
	role = strings.TrimSpace(role)
	(*c.m)[role] = append((*c.m)[role], strings.TrimSpace(heading))
	return nil
}

// completeWith offers words for the value of a flag.
func completeWith(cmd *cobra.Command, flag string, words ...string) {
	err := cmd.RegisterFlagCompletionFunc(flag, func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
		return words, cobra.ShellCompDirectiveNoFileComp
	})
	if err != nil {
		panic(err) // the flag does not exist: a bug of the caller
	}
}

// completeList offers words for a flag that takes several, separated by commas: what
// stands before the last comma is kept.
func completeList(cmd *cobra.Command, flag string, words ...string) {
	err := cmd.RegisterFlagCompletionFunc(flag, func(_ *cobra.Command, _ []string, typed string) ([]string, cobra.ShellCompDirective) {
		before := typed[:strings.LastIndexByte(typed, ',')+1]
		var offers []string
		for _, w := range words {
			offers = append(offers, before+w)
		}
		return offers, cobra.ShellCompDirectiveNoFileComp
	})
	if err != nil {
		panic(err) // the flag does not exist: a bug of the caller
	}
}

// closest returns the word that is nearest to a mistyped one, "" if none is near.
func closest(typed string, words []string) string {
	best, most := "", 1+len(typed)/6
	for _, w := range words {
		if d := editDistance(typed, w); d <= most {
			best, most = w, d-1
		}
	}
	if best == "" && len(typed) >= 3 {
		for _, w := range words {
			if strings.HasPrefix(w, typed) {
				return w
			}
		}
	}
	return best
}

// editDistance counts the letters to insert, delete, replace or swap with their
// neighbour (V. I. Levenshtein, Sov. Phys. Dokl. 10 (1966) 707; F. J. Damerau,
// Commun. ACM 7 (1964) 171).
func editDistance(a, b string) int {
	x, y := []rune(a), []rune(b)
	rows := make([][]int, len(x)+1)
	for i := range rows {
		rows[i] = make([]int, len(y)+1)
		rows[i][0] = i
	}
	for j := range rows[0] {
		rows[0][j] = j
	}
	for i := 1; i <= len(x); i++ {
		for j := 1; j <= len(y); j++ {
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			rows[i][j] = min(rows[i-1][j]+1, rows[i][j-1]+1, rows[i-1][j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				rows[i][j] = min(rows[i][j], rows[i-2][j-2]+1)
			}
		}
	}
	return rows[len(x)][len(y)]
}
