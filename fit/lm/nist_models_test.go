package lm

import "math"

// nistModel is the regression function f(b; x) of a NIST problem and its gradient ∂f/∂b.
type nistModel struct {
	value    func(b, x []float64) float64
	gradient func(dst, b, x []float64)
	logY     bool // the model describes ln y
}

// nistModels holds the 27 models as the data files state them. The gradients are ours and checked against differences.
var nistModels = map[string]nistModel{
	"Misra1a": {value: saturation, gradient: saturationGradient},
	"BoxBOD":  {value: saturation, gradient: saturationGradient},

	"Chwirut1": {value: chwirut, gradient: chwirutGradient},
	"Chwirut2": {value: chwirut, gradient: chwirutGradient},

	"Lanczos1": {value: exponentials, gradient: exponentialsGradient},
	"Lanczos2": {value: exponentials, gradient: exponentialsGradient},
	"Lanczos3": {value: exponentials, gradient: exponentialsGradient},

	"Gauss1": {value: peaks, gradient: peaksGradient},
	"Gauss2": {value: peaks, gradient: peaksGradient},
	"Gauss3": {value: peaks, gradient: peaksGradient},

	"DanWood": {
		value: func(b, x []float64) float64 { return b[0] * math.Pow(x[0], b[1]) },
		gradient: func(dst, b, x []float64) {
			dst[0] = math.Pow(x[0], b[1])
			dst[1] = b[0] * dst[0] * math.Log(x[0])
		},
	},
	"Misra1b": {
		value: func(b, x []float64) float64 { return b[0] * (1 - math.Pow(1+b[1]*x[0]/2, -2)) },
		gradient: func(dst, b, x []float64) {
			u := 1 + b[1]*x[0]/2
			dst[0] = 1 - math.Pow(u, -2)
			dst[1] = b[0] * x[0] * math.Pow(u, -3)
		},
	},
	"Misra1c": {
		value: func(b, x []float64) float64 { return b[0] * (1 - math.Pow(1+2*b[1]*x[0], -0.5)) },
		gradient: func(dst, b, x []float64) {
			u := 1 + 2*b[1]*x[0]
			dst[0] = 1 - math.Pow(u, -0.5)
			dst[1] = b[0] * x[0] * math.Pow(u, -1.5)
		},
	},
	"Misra1d": {
		value: func(b, x []float64) float64 { return b[0] * b[1] * x[0] / (1 + b[1]*x[0]) },
		gradient: func(dst, b, x []float64) {
			u := 1 + b[1]*x[0]
			dst[0] = b[1] * x[0] / u
			dst[1] = b[0] * x[0] / (u * u)
		},
	},
	"Kirby2":  {value: rational(2), gradient: rationalGradient(2)},
	"Hahn1":   {value: rational(3), gradient: rationalGradient(3)},
	"Thurber": {value: rational(3), gradient: rationalGradient(3)},
	"Nelson": {
		value: func(b, x []float64) float64 { return b[0] - b[1]*x[0]*math.Exp(-b[2]*x[1]) },
		gradient: func(dst, b, x []float64) {
			e := math.Exp(-b[2] * x[1])
			dst[0] = 1
			dst[1] = -x[0] * e
			dst[2] = b[1] * x[0] * x[1] * e
		},
		logY: true,
	},
	"MGH17": {
		value: func(b, x []float64) float64 {
			return b[0] + b[1]*math.Exp(-x[0]*b[3]) + b[2]*math.Exp(-x[0]*b[4])
		},
		gradient: func(dst, b, x []float64) {
			e, f := math.Exp(-x[0]*b[3]), math.Exp(-x[0]*b[4])
			dst[0], dst[1], dst[2] = 1, e, f
			dst[3], dst[4] = -b[1]*x[0]*e, -b[2]*x[0]*f
		},
	},
	"Roszman1": {
		value: func(b, x []float64) float64 {
			return b[0] - b[1]*x[0] - math.Atan(b[2]/(x[0]-b[3]))/math.Pi
		},
		gradient: func(dst, b, x []float64) {
			d := x[0] - b[3]
			den := math.Pi * (d*d + b[2]*b[2])
			dst[0], dst[1], dst[2], dst[3] = 1, -x[0], -d/den, -b[2]/den
		},
	},
	"ENSO": {
		value: func(b, x []float64) float64 {
			y := b[0]
			for _, w := range [][3]float64{{b[1], b[2], 12}, {b[4], b[5], b[3]}, {b[7], b[8], b[6]}} {
				sin, cos := math.Sincos(2 * math.Pi * x[0] / w[2])
				y += w[0]*cos + w[1]*sin
			}
			return y
		},
		gradient: func(dst, b, x []float64) {
			dst[0] = 1
			dst[2], dst[1] = math.Sincos(2 * math.Pi * x[0] / 12)
			for _, k := range []int{3, 6} {
				phase := 2 * math.Pi * x[0] / b[k]
				sin, cos := math.Sincos(phase)
				dst[k] = (b[k+1]*sin - b[k+2]*cos) * phase / b[k]
				dst[k+1], dst[k+2] = cos, sin
			}
		},
	},
	"MGH09": {
		value: func(b, x []float64) float64 {
			return b[0] * (x[0]*x[0] + x[0]*b[1]) / (x[0]*x[0] + x[0]*b[2] + b[3])
		},
		gradient: func(dst, b, x []float64) {
			num, den := x[0]*x[0]+x[0]*b[1], x[0]*x[0]+x[0]*b[2]+b[3]
			dst[0] = num / den
			dst[1] = b[0] * x[0] / den
			dst[2] = -b[0] * num * x[0] / (den * den)
			dst[3] = -b[0] * num / (den * den)
		},
	},
	"Rat42": {
		value: func(b, x []float64) float64 { return b[0] / (1 + math.Exp(b[1]-b[2]*x[0])) },
		gradient: func(dst, b, x []float64) {
			e := math.Exp(b[1] - b[2]*x[0])
			u := 1 + e
			dst[0] = 1 / u
			dst[1] = -b[0] * e / (u * u)
			dst[2] = b[0] * e * x[0] / (u * u)
		},
	},
	"MGH10": {
		value: func(b, x []float64) float64 { return b[0] * math.Exp(b[1]/(x[0]+b[2])) },
		gradient: func(dst, b, x []float64) {
			d := x[0] + b[2]
			e := math.Exp(b[1] / d)
			dst[0] = e
			dst[1] = b[0] * e / d
			dst[2] = -b[0] * e * b[1] / (d * d)
		},
	},
	"Eckerle4": {
		value: func(b, x []float64) float64 {
			z := (x[0] - b[2]) / b[1]
			return b[0] / b[1] * math.Exp(-z*z/2)
		},
		gradient: func(dst, b, x []float64) {
			z := (x[0] - b[2]) / b[1]
			e := math.Exp(-z * z / 2)
			dst[0] = e / b[1]
			dst[1] = b[0] * e / (b[1] * b[1]) * (z*z - 1)
			dst[2] = b[0] * e / (b[1] * b[1]) * z
		},
	},
	"Rat43": {
		value: func(b, x []float64) float64 {
			return b[0] / math.Pow(1+math.Exp(b[1]-b[2]*x[0]), 1/b[3])
		},
		gradient: func(dst, b, x []float64) {
			e := math.Exp(b[1] - b[2]*x[0])
			u := 1 + e
			p := math.Pow(u, -1/b[3])
			dst[0] = p
			dst[1] = -b[0] * p * e / (u * b[3])
			dst[2] = b[0] * p * e * x[0] / (u * b[3])
			dst[3] = b[0] * p * math.Log(u) / (b[3] * b[3])
		},
	},
	"Bennett5": {
		value: func(b, x []float64) float64 { return b[0] * math.Pow(b[1]+x[0], -1/b[2]) },
		gradient: func(dst, b, x []float64) {
			u := b[1] + x[0]
			p := math.Pow(u, -1/b[2])
			dst[0] = p
			dst[1] = -b[0] * p / (u * b[2])
			dst[2] = b[0] * p * math.Log(u) / (b[2] * b[2])
		},
	},
}

func saturation(b, x []float64) float64 { return b[0] * (1 - math.Exp(-b[1]*x[0])) }

func saturationGradient(dst, b, x []float64) {
	e := math.Exp(-b[1] * x[0])
	dst[0] = 1 - e
	dst[1] = b[0] * x[0] * e
}

func chwirut(b, x []float64) float64 { return math.Exp(-b[0]*x[0]) / (b[1] + b[2]*x[0]) }

func chwirutGradient(dst, b, x []float64) {
	den := b[1] + b[2]*x[0]
	y := math.Exp(-b[0]*x[0]) / den
	dst[0] = -x[0] * y
	dst[1] = -y / den
	dst[2] = -x[0] * y / den
}

func exponentials(b, x []float64) float64 {
	var y float64
	for k := 0; k < 6; k += 2 {
		y += b[k] * math.Exp(-b[k+1]*x[0])
	}
	return y
}

func exponentialsGradient(dst, b, x []float64) {
	for k := 0; k < 6; k += 2 {
		dst[k] = math.Exp(-b[k+1] * x[0])
		dst[k+1] = -b[k] * x[0] * dst[k]
	}
}

// peaks is an exponential decay with two Gaussian peaks on it.
func peaks(b, x []float64) float64 {
	y := b[0] * math.Exp(-b[1]*x[0])
	for k := 2; k < 8; k += 3 {
		z := (x[0] - b[k+1]) / b[k+2]
		y += b[k] * math.Exp(-z*z)
	}
	return y
}

func peaksGradient(dst, b, x []float64) {
	dst[0] = math.Exp(-b[1] * x[0])
	dst[1] = -b[0] * x[0] * dst[0]
	for k := 2; k < 8; k += 3 {
		z := (x[0] - b[k+1]) / b[k+2]
		dst[k] = math.Exp(-z * z)
		dst[k+1] = b[k] * dst[k] * 2 * z / b[k+2]
		dst[k+2] = b[k] * dst[k] * 2 * z * z / b[k+2]
	}
}

// rational is (b_1 + b_2·x + … )/(1 + b_{d+2}·x + …), both of degree d.
func rational(degree int) func(b, x []float64) float64 {
	return func(b, x []float64) float64 {
		num, den := fraction(b, x[0], degree)
		return num / den
	}
}

func fraction(b []float64, x float64, degree int) (num, den float64) {
	num, den = b[0], 1
	power := 1.0
	for k := 1; k <= degree; k++ {
		power *= x
		num += b[k] * power
		den += b[degree+k] * power
	}
	return num, den
}

func rationalGradient(degree int) func(dst, b, x []float64) {
	return func(dst, b, x []float64) {
		num, den := fraction(b, x[0], degree)
		dst[0] = 1 / den
		power := 1.0
		for k := 1; k <= degree; k++ {
			power *= x[0]
			dst[k] = power / den
			dst[degree+k] = -num * power / (den * den)
		}
	}
}
