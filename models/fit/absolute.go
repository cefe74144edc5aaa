package fit

import "onebarrier/models"

func fitInK(s *Sample, c models.Curve) *Result {
	r := newResult(s, c)
	r.Reason = "errors in k: not fitted yet"
	return r
}
