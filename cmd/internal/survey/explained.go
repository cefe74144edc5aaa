package survey

import "onebarrier/diagnostics"

// Explained are the columns of a table that a reader has to know the meaning of, as
// explain tells them.
var Explained = []diagnostics.Entry{
	{
		Code: "p_value", Title: "p of the test that E does not change", Severity: diagnostics.Info,
		Explanation: "The probability of a curvature as large as this one, or larger, where ln k against 1/T is straight. It is of one data set by itself: of 1000 straight data sets 50 are expected to have p below 0.05.",
		Cure:        "of many data sets use q_value",
	},
	{
		Code: "p_band", Title: "p of the test that E changes by no more than a usual prefactor explains", Severity: diagnostics.Info,
		Explanation: "As p_value, but of the exponent n of T in the prefactor band (--prefactor-band, 0 to 1): the largest p that an n of the band has.",
		Cure:        "of many data sets use q_band",
	},
	{
		Code: "q_value", Title: "false discovery rate of: E changes", Severity: diagnostics.Info,
		Explanation: "Where every data set with this q_value or a smaller one is called curved, no more than this share of them is expected to be straight. It comes from the p_value of all data sets of the store that can be tested, before any filter. A data set that is there twice counts twice.",
		Cure:        "onebarrier survey table --max-q 0.1 lists those at a rate of 10 %",
		Reference:   "Y. Benjamini and Y. Hochberg, J. R. Stat. Soc. B 57 (1995) 289",
	},
	{
		Code: "q_band", Title: "false discovery rate of: more than one barrier with a usual prefactor", Severity: diagnostics.Info,
		Explanation: "As q_value, from p_band: where every data set with this q_band or a smaller one is said to have more than one constant barrier with a usual prefactor gives, no more than this share of them is expected to have one. The verdict beyond-prefactor is at 5 % for each data set by itself; q_band is over all.",
		Cure:        "onebarrier survey table --max-q-band 0.1 lists those at a rate of 10 %",
		Reference:   "Y. Benjamini and Y. Hochberg, J. R. Stat. Soc. B 57 (1995) 289",
	},
}
