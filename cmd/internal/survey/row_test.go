package survey

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"onebarrier/models/dataset"
)

// The columns stand here as the specification of the table lists them.
const wantColumns = "set_id,dataset,source_file,sheet,points,temperatures,left_out,sources,t_min_k,t_max_k,quantity,rate_unit,error_model,state,material,e_trend,exponent,exponent_lower,exponent_upper,e_change_kj_per_mol,e_change_lower,e_change_upper,detectable_kj_per_mol,p_value,p_band,q_value,q_band,second_barrier_p,recommended_curve,first_curve,first_weight,straight_e_kj_per_mol,straight_e_u,straight_ln_a,state_share,warnings,error_code,error,error_row"

func TestColumns(t *testing.T) {
	if got := strings.Join(Row{}.Columns(), ","); got != wantColumns {
		t.Errorf("columns\n%s\nwant\n%s", got, wantColumns)
	}
}

// What is not known is nil among the values: never 0, never "".
func TestUnknownValues(t *testing.T) {
	r := emptyRow()
	values := r.Values()
	if len(values) != len(columns) {
		t.Fatalf("%d values for %d columns", len(values), len(columns))
	}
	for i, v := range values {
		if _, isText := v.(string); !isText && v != nil {
			t.Errorf("%s is %v, want unknown", columns[i], v)
		}
	}
	yes := true
	r.Points, r.PValue, r.Material, r.State = 0, 0, &yes, "unresolved"
	for i, want := range map[int]any{4: int64(0), 23: 0.0, 14: true, 13: "unresolved", 25: nil} {
		if got := r.Values()[i]; got != want {
			t.Errorf("%s is %v, want %v", columns[i], got, want)
		}
	}
}

// In a survey a cure is a line for the file, not a flag for all files; each line that is
// printed is understood.
func TestCureIsALine(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"ambiguous T.csv", "T,k/s^-1\n288,1\n298,2\n", "ambiguous T.csv,T,T,K, or ambiguous T.csv,T,T,degC, or ambiguous T.csv,T,T,degF,"},
		{"a.csv", "T/K,log k\n288,1\n298,2\n", "a.csv,log k,lg k,, or a.csv,log k,ln k,,"},
		{"a.csv", "T/K,\"sl, 2\"\n288,1\n298,2\n", `a.csv,"sl, 2",k,s^-1,`},
		{"a.csv", "T/K,p/bar\n288,1\n298,2\n", "write the heading as k/s^-1"},
		{"a.csv", "1/kT,k/s^-1\n40,1\n41,2\n", "write the unit into the heading, as in T/K"},
	} {
		_, err := dataset.Read("folder/"+c.name, strings.NewReader(c.text), dataset.Options{})
		var ps dataset.Problems
		if !errors.As(err, &ps) {
			t.Fatal(c.text, err)
		}
		r := emptyRow()
		r.failed(ps)
		if !strings.HasSuffix(r.Error, c.want) || strings.Contains(r.Error, "--") {
			t.Errorf("%s: %s", c.text, r.Error)
		}
		_, lines, _ := strings.Cut(r.Error, columnsHead+": ")
		for line := range strings.SplitSeq(lines, " or ") {
			dir := t.TempDir()
			if err := os.WriteFile(filepath.Join(dir, ColumnsFile), []byte(columnsHead+"\n"+line+"\n"), 0o600); err != nil {
				t.Fatal(err)
			}
			if rules, p := readColumnsFile(dir); p != nil || lines != "" && (len(rules) != 1 || rules[0].files != c.name) {
				t.Errorf("%s: %v %v", line, rules, p)
			}
		}
	}
}
