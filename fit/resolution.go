package fit

import "math"

// Decimal places that a file's numbers are looked at for: with more digits
// than maxDigits the rounding is far below any noise, and with fewer than
// minDigits the values happen to be round.
const (
	minDigits = 4
	maxDigits = 6
)

// roundingSquares returns Σ|δ_i|² over the points, where |δ_i| is the largest
// relative error of z_i that rounding in the file can have made: half a unit
// of the last place of |Z| and of its phase in degrees, or of R and X,
// whichever pair was rounded to a few digits. It is 0 where neither was.
// Residuals with no larger sum of squares say nothing about the part.
func roundingSquares(z []complex128) float64 {
	if len(z) == 0 {
		return 0
	}
	polar, cartesian := true, true // as far as a few points tell, which is mostly no
	for _, v := range z[:min(len(z), 4)] {
		polar = polar && short(abs(v), 1e-12) && short(180/math.Pi*math.Atan2(imag(v), real(v)), 1e-10)
		cartesian = cartesian && short(real(v), 1e-12) && short(imag(v), 1e-12)
	}
	if !polar && !cartesian {
		return 0
	}
	first, second := make([]float64, len(z)), make([]float64, len(z))
	for i, v := range z {
		first[i], second[i] = abs(v), 180/math.Pi*math.Atan2(imag(v), real(v))
	}
	// The way from degrees to Z and back costs the phase some bits.
	if m := lastPlaces(first, 1e-12); m != nil {
		if ph := lastPlaces(second, 1e-10); ph != nil {
			sum := 0.0
			for i, v := range first {
				a, b := m[i]/v/2, ph[i]*math.Pi/180/2
				sum += a*a + b*b
			}
			return sum
		}
	}
	for i, v := range z {
		first[i], second[i] = real(v), imag(v)
	}
	re, im := lastPlaces(first, 1e-12), lastPlaces(second, 1e-12)
	if re == nil || im == nil {
		return 0
	}
	sum := 0.0
	for i, v := range z {
		a, b := re[i]/2, im[i]/2
		sum += (a*a + b*b) / (real(v)*real(v) + imag(v)*imag(v))
	}
	return sum
}

// lastPlaces returns the unit of the last place of each value, in the unit of
// the values: 10^k where all have so many decimal places, or so many
// significant digits, whichever is coarser. It is nil where values have more
// than maxDigits digits. tol is the relative error that does not count.
func lastPlaces(values []float64, tol float64) []float64 {
	largest := 0.0
	for _, v := range values {
		largest = max(largest, math.Abs(v))
	}
	if largest == 0 {
		return nil
	}
	digits, places := minDigits, minDigits
	for _, v := range values {
		if v == 0 {
			continue
		}
		for !isMultiple(v, unit(math.Abs(v), digits), tol) {
			if digits++; digits > maxDigits {
				return nil
			}
		}
		for places <= maxDigits+1 && !isMultiple(v, unit(largest, places), tol) {
			places++
		}
	}
	units := make([]float64, len(values))
	for i, v := range values {
		if v != 0 {
			units[i] = unit(math.Abs(v), digits)
		}
		if places <= maxDigits {
			units[i] = max(units[i], unit(largest, places))
		}
	}
	return units
}

// short reports whether a value has no more than maxDigits significant digits.
func short(v, tol float64) bool {
	return v == 0 || isMultiple(v, unit(math.Abs(v), maxDigits), tol)
}

// isMultiple reports whether v is a multiple of a unit but for a relative error.
func isMultiple(v, unit, tol float64) bool {
	return math.Abs(v-unit*math.Round(v/unit)) <= tol*math.Abs(v)
}

// unit returns the power of ten of the last of so many significant digits of a
// value.
func unit(size float64, digits int) float64 {
	return math.Pow(10, math.Floor(math.Log10(size))+1-float64(digits))
}
