package models

import "gonum.org/v1/gonum/unit/constant"

// The defining constants of the SI (exact since 2019; SI Brochure, 9th ed.,
// table 1) as gonum carries them, and the molar gas constant that follows.
const (
	Boltzmann = float64(constant.Boltzmann) // k_B, J/K
	Planck    = float64(constant.Planck)    // h, J s
	Avogadro  = float64(constant.Avogadro)  // N_A, 1/mol

	// GasConstant is R = k_B N_A = 8.31446261815324 J/(mol K).
	GasConstant = Boltzmann * Avogadro
)
