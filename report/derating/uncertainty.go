package derating

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit"
)

// spread gathers what the uncertainty of ln y comes from, where y depends on
// the parameters of one or several fits: g holds ∂ln y/∂x for each.
type spread struct {
	fits []*fit.Result
	g    [][]float64 // [fit][free parameter]
}

// add adds the sensitivity of a term of ln y: Σ_line weight·∂ln R_line/∂x.
func (s *spread) add(r *resistance, weight func(line int) float64) {
	i := slices.Index(s.fits, r.fit)
	if i < 0 {
		i = len(s.fits)
		s.fits, s.g = append(s.fits, r.fit), append(s.g, make([]float64, len(r.fit.Free)))
	}
	for c, row := range r.dln {
		for line, d := range row {
			s.g[i][c] += weight(line) * d
		}
	}
}

// relative returns the half-width of the 95 % interval of ln y, and how wide it
// were from scatter and from the meter's accuracy alone. The covariance of each
// fit is that of its parameters, so that resistances at several frequencies go
// together as they do in the fit:
//
//	u² = Σ_fits gᵀ·C·g + (Σ_fits √(gᵀ·C_meter·g))²
//
// Scatter of separate sweeps is independent; the meter is the same, so that its
// parts add up. Expanded by Student t at the effective degrees of freedom
// (Welch–Satterthwaite, GUM G.4.1).
func (s *spread) relative() (u, scatter, meter float64) {
	total, denominator, common := 0.0, 0.0, 0.0
	for i, r := range s.fits {
		if len(r.Free) == 0 {
			continue
		}
		g := mat.NewVecDense(len(s.g[i]), s.g[i])
		v := max(mat.Inner(g, r.Covariance, g), 0)
		if r.DegreesOfFreedom < 1 {
			return math.Inf(1), math.Inf(1), 0
		}
		total += v
		denominator += v * v / float64(r.DegreesOfFreedom)
		if r.MeterCovariance != nil {
			common += math.Sqrt(max(mat.Inner(g, r.MeterCovariance, g), 0))
		}
	}
	return expanded(total+common*common, denominator), expanded(total, denominator), expanded(common*common, 0)
}

// expanded is the half-width of a 95 % interval from a variance;
// variance²/denominator are the effective degrees of freedom.
func expanded(variance, denominator float64) float64 {
	if variance == 0 {
		return 0
	}
	t := distuv.UnitNormal.Quantile(0.975)
	if nu := variance * variance / denominator; nu < 1e6 { // else Student's t is normal to 1e-6
		t = distuv.StudentsT{Sigma: 1, Nu: nu}.Quantile(0.975)
	}
	return t * math.Sqrt(variance)
}

// leading names the parameter of the first fit whose uncertainty alone moves
// ln y most; "" if none does.
func (s *spread) leading() string {
	if len(s.fits) == 0 || len(s.fits[0].Free) == 0 {
		return ""
	}
	r := s.fits[0]
	size := func(c int) float64 { return s.g[0][c] * s.g[0][c] * r.Covariance.At(c, c) }
	best := 0
	for c := range r.Free {
		if cmp.Compare(size(c), size(best)) > 0 {
			best = c
		}
	}
	if !(size(best) > 0) {
		return ""
	}
	return r.Parameters[r.Free[best]].Name
}
