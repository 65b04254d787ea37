package derating

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"

	"realpart/models"
)

// Schema names the form of an [Assessment] in JSON.
const Schema = "realpart.derate/1"

// Verdict is the answer to a limit.
type Verdict string

// The verdicts.
const (
	Within       Verdict = "within"
	Exceeded     Verdict = "exceeded"
	NoLimitGiven Verdict = "no-limit-given"
)

// Assessment is what a ripple current does to a part or to a lot. A nil pointer
// is what was not asked for or does not exist. All numbers are finite.
type Assessment struct {
	Schema string `json:"schema"`
	// Part is the name of a single part, Lot that of a lot.
	Part  string      `json:"part,omitzero"`
	Lot   string      `json:"lot,omitzero"`
	Kind  models.Kind `json:"kind"`
	Parts []Measured  `json:"parts"`
	// Series are the sweeps of one part at several temperatures.
	Series    []Measured `json:"temperature_series,omitzero"`
	Ripple    Ripple     `json:"ripple"`
	Harmonics []Harmonic `json:"harmonics"`
	// LossW is that at the hot spot where one is known, else at the
	// temperature of the sweep; for a lot that of a part whose resistance is
	// the tolerance bound at every frequency.
	LossW       float64  `json:"loss_w"`
	LossLow95W  *float64 `json:"loss_low95_w,omitzero"`
	LossHigh95W *float64 `json:"loss_high95_w,omitzero"`

	RthKPerW *float64 `json:"rth_k_per_w,omitzero"`
	RthFrom  string   `json:"rth_from,omitzero"`
	AmbientC *float64 `json:"ambient_c,omitzero"`
	RiseK    *float64 `json:"rise_k,omitzero"`
	HotSpotC *float64 `json:"hot_spot_c,omitzero"`
	// HotSpotLow95C and HotSpotHigh95C bound the 95 % interval of a single
	// part's hot spot; the latter is absent if the part would run away there.
	HotSpotLow95C  *float64 `json:"hot_spot_low95_c,omitzero"`
	HotSpotHigh95C *float64 `json:"hot_spot_high95_c,omitzero"`
	// Runaway tells that there is no temperature at which the part comes to
	// rest.
	Runaway bool     `json:"runaway,omitzero"`
	LimitC  *float64 `json:"limit_c,omitzero"`
	// RequiredMarginK is the margin that the user wants, MarginK what is left
	// from the hot spot to the limit.
	RequiredMarginK *float64 `json:"required_margin_k,omitzero"`
	MarginK         *float64 `json:"margin_k,omitzero"`
	// MaxRippleA is the total RMS of the same spectrum, scaled until the hot
	// spot is the limit less the wanted margin. MaxRippleLow95A and
	// MaxRippleHigh95A bound its 95 % interval for a single part.
	MaxRippleA       *float64 `json:"max_ripple_a,omitzero"`
	MaxRippleLow95A  *float64 `json:"max_ripple_low95_a,omitzero"`
	MaxRippleHigh95A *float64 `json:"max_ripple_high95_a,omitzero"`

	Statistics *Statistics `json:"lot_statistics,omitzero"`
	Voltage    *Voltage    `json:"voltage,omitzero"`
	LifeH      *float64    `json:"life_h,omitzero"`
	Life       *Life       `json:"life,omitzero"`

	// Uncertainty lists what the loss is uncertain by, the largest first;
	// what cannot be put in numbers comes last.
	Uncertainty []Source  `json:"uncertainty"`
	Warnings    []Warning `json:"warnings"`
	Verdict     Verdict   `json:"verdict"`
	Cautions    []string  `json:"cautions"`

	heating heating // for [Assessment.Curve]
}

// Measured is a sweep that was used. TemperatureC is absent where it is not
// known.
type Measured struct {
	File         string   `json:"file"`
	Part         string   `json:"part"`
	SHA256       string   `json:"sha256,omitzero"`
	Circuit      string   `json:"circuit"`
	TemperatureC *float64 `json:"temperature_c,omitzero"`
}

// Ripple sums up the current. CoveredShare is the share of the squared RMS that
// the harmonics hold; DirectA is direct current, which heats an inductor.
type Ripple struct {
	Text         string  `json:"text"`
	RMSA         float64 `json:"rms_a"`
	CoveredShare float64 `json:"covered_share"`
	DirectA      float64 `json:"direct_a,omitzero"`
}

// Harmonic is a line of the ripple current with the resistance that it meets:
// ESROhm is the fitted one of a single part with its 95 % interval, of a lot the
// upper one-sided tolerance bound; the loss is at the hot spot where one is
// known, with ESRHotOhm there if resistance goes with temperature. Line 0 Hz is
// direct current.
type Harmonic struct {
	FHz      float64  `json:"f_hz"`
	IRMSA    float64  `json:"i_rms_a"`
	ESROhm   float64  `json:"esr_ohm"`
	Low95    *float64 `json:"esr_low95_ohm,omitzero"`
	High95   *float64 `json:"esr_high95_ohm,omitzero"`
	Measured *float64 `json:"esr_measured_ohm,omitzero"` // by the sweep itself; of a lot, the mean
	Mean     *float64 `json:"esr_mean_ohm,omitzero"`     // of a lot
	SD       *float64 `json:"esr_sd_ohm,omitzero"`
	Worst    *float64 `json:"esr_worst_ohm,omitzero"`
	Hot      *float64 `json:"esr_hot_ohm,omitzero"`
	LossW    float64  `json:"loss_w"`
	Share    float64  `json:"loss_share"`
	InSweep  bool     `json:"in_sweep"` // of every part
	// BelowResolution tells that the meter's stated accuracy cannot tell the
	// ESR of some part from zero; nil without a stated accuracy or outside
	// the sweep.
	BelowResolution *bool `json:"below_resolution,omitzero"`
}

// Statistics are those of a lot.
type Statistics struct {
	N int `json:"n"`
	// Factor is that of the one-sided tolerance bound mean + Factor·s, above
	// CoveredShare of a normal lot with confidence Confidence.
	Factor       float64 `json:"tolerance_factor"`
	CoveredShare float64 `json:"covered_share"`
	Confidence   float64 `json:"confidence"`
	MeanLossW    float64 `json:"mean_loss_w"`
	SDLossW      float64 `json:"sd_loss_w"`
	// The part with the largest loss of those measured.
	WorstPart     string   `json:"worst_part"`
	WorstLossW    float64  `json:"worst_loss_w"`
	WorstHotSpotC *float64 `json:"worst_hot_spot_c,omitzero"`
	// ExceedingParts of those measured exceed the limit less the margin, and
	// ExceedingShare of the lot is predicted to.
	ExceedingParts *int     `json:"exceeding_parts,omitzero"`
	ExceedingShare *float64 `json:"exceeding_share,omitzero"`
}

// Voltage is the voltage across the part.
type Voltage struct {
	DCV         float64 `json:"dc_v"`
	RipplePeakV float64 `json:"ripple_peak_v"`
	// RippleTroughV is the lowest value of the ripple. OwnPeak tells that
	// peak and trough are those of the waveform; else they are ±√2·ΣI·|Z|,
	// the worst case, and RippleRootSumV is √2 times the root sum of squares.
	RippleTroughV  float64  `json:"ripple_trough_v"`
	OwnPeak        bool     `json:"own_peak"`
	RippleRootSumV float64  `json:"ripple_root_sum_v,omitzero"`
	PeakV          float64  `json:"peak_v"`
	RatedV         *float64 `json:"rated_v,omitzero"`
	Factor         *float64 `json:"factor,omitzero"`
	MarginV        *float64 `json:"margin_v,omitzero"` // to the rating times the factor, if one was given
	Verdict        Verdict  `json:"verdict"`
}

// Life is how LifeH was found.
type Life struct {
	RatedH float64 `json:"rated_h"`
	RatedC float64 `json:"rated_c"`
	Capped bool    `json:"capped"`
	CapH   float64 `json:"cap_h"`
	Rule   string  `json:"rule"`
}

// Source is something that the loss is uncertain by. Relative95 is the
// half-width of its 95 % interval relative to the loss, nil where it cannot be
// put in numbers.
type Source struct {
	Source     string   `json:"source"`
	Relative95 *float64 `json:"relative95,omitzero"`
	Text       string   `json:"text"`
	Remedy     string   `json:"remedy"`
}

// Warning is something that its reader must know. Code is stable.
type Warning struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// WriteJSON writes the assessment as one line of JSON.
func (a *Assessment) WriteJSON(w io.Writer) error {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false) // units and names stay readable
	if err := e.Encode(a); err != nil {
		return fmt.Errorf("derating: %w", err)
	}
	_, err := w.Write(b.Bytes())
	return err
}

// CurvePoint is a hot spot at a total RMS of the ripple current.
type CurvePoint struct{ RippleA, HotSpotC float64 }

// Curve returns the hot spot in °C over the total RMS current in A of the same
// spectrum, from 0 to the given one; it ends early where the part would run
// away. It is nil where the temperature is not known.
func (a *Assessment) Curve(upTo float64, points int) []CurvePoint {
	if a.heating.loss == nil {
		return nil
	}
	var curve []CurvePoint
	for i := range points {
		current := upTo * float64(i) / float64(points-1)
		k := current / a.Ripple.RMSA
		t, stable := a.heating.hotSpot(k * k)
		if !stable {
			break
		}
		curve = append(curve, CurvePoint{current, t})
	}
	return curve
}
