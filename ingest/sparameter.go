package ingest

import "math"

// ImpedanceFromS converts a measured S-parameter to the impedance of the part,
// with the reference resistance z0 in Ω, real and equal at both ports:
//
//	reflection (S11):  Z = Z0·(1 + S)/(1 − S)
//	series (S21):      Z = 2·Z0·(1 − S)/S
//	shunt (S21):       Z = (Z0/2)·S/(1 − S)
//
// They follow from the voltage division between the part and the ports. A
// value of S that no finite impedance gives returns an infinity or NaN.
func ImpedanceFromS(s complex128, z0 float64, connection string) complex128 {
	r := complex(z0, 0)
	switch connection {
	case ConnectionSeries:
		return 2 * r * (1 - s) / s
	case ConnectionShunt:
		return r / 2 * s / (1 - s)
	}
	return r * (1 + s) / (1 - s)
}

// SFromImpedance is the inverse of ImpedanceFromS.
func SFromImpedance(z complex128, z0 float64, connection string) complex128 {
	r := complex(z0, 0)
	switch connection {
	case ConnectionSeries:
		return 2 * r / (2*r + z)
	case ConnectionShunt:
		return 2 * z / (2*z + r)
	}
	return (z - r) / (z + r)
}

// fromDB is the ratio of a level in dB.
func fromDB(db float64) float64 { return math.Pow(10, db/20) }
