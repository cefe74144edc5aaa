package survey

import (
	"strings"
	"testing"
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
