package derating

// VoltageConditions are what the voltage is judged against.
type VoltageConditions struct {
	DC     float64  // V
	Rated  *float64 // V
	Factor *float64 // up to 1, of the rating that the user permits
}

// assess adds the ripple to the direct voltage. Of a lot, each value is the
// largest of its parts. A rating without a factor of the user gives a margin
// and no verdict, save that a peak above the rating itself exceeds under any
// factor.
func (c *VoltageConditions) assess(parts []Sweep, ripple *Spectrum) *Voltage {
	v := &Voltage{DCV: c.DC, RatedV: c.Rated, Factor: c.Factor, OwnPeak: ripple.phasors != nil, Verdict: NoLimitGiven}
	for _, p := range parts {
		high, low, rootSum := ripple.voltage(impedance(p.Fit))
		v.RipplePeakV, v.RippleTroughV = max(v.RipplePeakV, high), min(v.RippleTroughV, low)
		if !v.OwnPeak {
			v.RippleRootSumV = max(v.RippleRootSumV, rootSum)
		}
	}
	v.PeakV = c.DC + v.RipplePeakV
	if c.DC < 0 { // the polarity is only a name
		v.PeakV = -c.DC - v.RippleTroughV
	}
	if c.Rated == nil {
		return v
	}
	permitted := *c.Rated
	if c.Factor != nil {
		permitted *= *c.Factor
	}
	margin := permitted - v.PeakV
	v.MarginV = &margin
	switch {
	case !(margin >= 0):
		v.Verdict = Exceeded
	case c.Factor != nil:
		v.Verdict = Within
	}
	return v
}
