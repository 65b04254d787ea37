package derating

import "math"

// LifeRating is a data sheet's life at a temperature.
type LifeRating struct {
	Hours        float64
	TemperatureC float64
}

// mostLife caps the life: beyond 15 years seals and chemistry, not the rule,
// set the end. Common practice, no source.
const mostLife = 15 * 365.25 * 24

// at returns the life in h at a hot spot in °C, by the rule of wet aluminium
// electrolytics that each 10 K less double it (common practice, no source):
//
//	L = L₀·2^((T₀ − T)/10 K), at most [mostLife]
func (r LifeRating) at(hotSpot float64) (life float64, capped bool) {
	life = r.Hours * math.Exp2((r.TemperatureC-hotSpot)/10)
	if life > mostLife {
		return mostLife, true
	}
	return life, false
}
