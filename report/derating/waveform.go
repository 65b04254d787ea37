package derating

import (
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/dsp/fourier"

	"realpart/models/quantity"
)

// Trapezoid is one period of a current that rises evenly from 0 to its height,
// stays, falls evenly back to 0 and stays. Triangle and rectangle are its
// extremes.
type Trapezoid struct {
	Height float64 // A, from the lowest to the highest value
	// Rise and Fall are the shares of the period that the edges take, 0 for
	// a step. Width is that between the middles of the edges.
	Rise, Fall, Width float64
}

// check says what is wrong with the shape.
func (w Trapezoid) check() error {
	edges := (w.Rise + w.Fall) / 2
	switch {
	case !(w.Height > 0) || math.IsInf(w.Height, 1):
		return fmt.Errorf("expected a current above 0 A, found %v A", w.Height)
	case !(w.Width > 0 && w.Width < 1):
		return fmt.Errorf("expected a duty above 0 and below 1, found %v", w.Width)
	case !(w.Rise >= 0 && w.Fall >= 0):
		return fmt.Errorf("expected edges of 0 or more, found rise %v and fall %v", w.Rise, w.Fall)
	case edges > w.Width*(1+1e-12) || edges > (1-w.Width)*(1+1e-12):
		return fmt.Errorf("expected edges that fit into the period, found rise %.4g and fall %.4g of it with a duty of %.4g (between the middles of the edges)", w.Rise, w.Fall, w.Width)
	}
	return nil
}

// RMS returns the root mean square in A of the AC part, in closed form:
//
//	I² = H²·(w − (r+f)/6 − w²)
//
// with height H, width w and edges r, f as shares of the period: H·√(w(1−w))
// for a rectangle, H/√12 for a triangle of any slopes.
func (w Trapezoid) RMS() float64 {
	return w.Height * math.Sqrt(w.Width-(w.Rise+w.Fall)/6-w.Width*w.Width)
}

// Harmonic returns the RMS phasor in A of harmonic n ≥ 1, with time counted
// from the middle of the rising edge:
//
//	I_n = H/(√2·πn)·(sinc(πnr) − exp(−j2πnw)·sinc(πnf))/j,  sinc x = sin x/x
//
// The derivative of a trapezoid is two rectangles; their Fourier coefficients,
// divided by jω, are its own.
func (w Trapezoid) Harmonic(n int) complex128 {
	x := math.Pi * float64(n)
	_, turn := math.Modf(float64(n) * w.Width)
	edges := complex(sinc(x*w.Rise), 0) - cmplx.Rect(sinc(x*w.Fall), -2*math.Pi*turn)
	return complex(w.Height/(math.Sqrt2*x), 0) * edges * complex(0, -1)
}

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(x) / x
}

// sampledPeriod returns the RMS phasors of the harmonics of one period in
// equal steps, the root mean square of its AC part and its mean.
func sampledPeriod(samples []float64) (phasors []complex128, rms, mean float64) {
	n := len(samples)
	for _, v := range samples {
		mean += v / float64(n)
	}
	sum := 0.0
	for _, v := range samples {
		sum += (v - mean) * (v - mean)
	}
	c := fourier.NewFFT(n).Coefficients(nil, samples)
	for k := 1; k < len(c); k++ {
		scale := math.Sqrt2 / float64(n)
		if 2*k == n {
			scale = 1 / float64(n) // it has no partner of negative frequency
		}
		phasors = append(phasors, c[k]*complex(scale, 0))
	}
	return phasors, math.Sqrt(sum / float64(n)), mean
}

// describe names the shape.
func (w Trapezoid) describe(kind string, fundamental float64) string {
	at := " at " + quantity.Format(fundamental, "Hz", 4)
	height := quantity.Format(w.Height, "A", 3)
	switch kind {
	case "triangle":
		s := "triangle of " + height + " peak to peak" + at
		if w.Rise != 0.5 {
			s += fmt.Sprintf(", rising for %.3g of the period", w.Rise)
		}
		return s
	case "rectangle":
		return fmt.Sprintf("rectangle of %s, duty %.3g,%s", height, w.Width, at)
	}
	return fmt.Sprintf("trapezoid of %s, duty %.3g, rise %s, fall %s,%s", height, w.Width,
		quantity.Format(w.Rise/fundamental, "s", 3), quantity.Format(w.Fall/fundamental, "s", 3), at)
}
