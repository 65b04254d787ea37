package report

import (
	"encoding/csv"
	"io"
	"math/cmplx"

	"github.com/gocarina/gocsv"
)

// Points are the points of one sweep for [WriteResiduals].
type Points struct {
	File, Part string
	Traces     *Traces
}

// residualRow is a point of a sweep; the tags are the header of the table.
type residualRow struct {
	File     string     `csv:"file"`
	Part     string     `csv:"part"`
	Freq     csvNumber  `csv:"f (Hz)"`
	Z        csvNumber  `csv:"measured Z (Ω)"`
	Phase    csvNumber  `csv:"measured phase (°)"`
	R        csvNumber  `csv:"measured R (Ω)"`
	X        csvNumber  `csv:"measured X (Ω)"`
	ModelZ   csvNumber  `csv:"model Z (Ω)"`
	ModelPh  csvNumber  `csv:"model phase (°)"`
	ModelR   csvNumber  `csv:"model R (Ω)"`
	ModelX   csvNumber  `csv:"model X (Ω)"`
	Residual csvNumber  `csv:"residual of ln Z (1)"`
	Angle    csvNumber  `csv:"residual of phase (°)"`
	MeterZ   *csvNumber `csv:"meter Z (1)"`
	MeterPh  *csvNumber `csv:"meter phase (°)"`
}

// csvNumber is written with the fewest digits that give it back, and with an
// exponent where it is long.
type csvNumber float64

// MarshalCSV writes the number.
func (n csvNumber) MarshalCSV() (string, error) { return number(float64(n)), nil }

// WriteResiduals writes a table of the fitted points of all sweeps: measured,
// model and residual, model less measured: of ln |Z|, which is the relative
// error for small ones, and of the phase in degrees. The meter's stated
// accuracy stands beside them where there is one, else the cells are empty.
func WriteResiduals(w io.Writer, sweeps []Points) error {
	rows := []residualRow{}
	for _, s := range sweeps {
		t := s.Traces
		for i, f := range t.Freq {
			z, m, r := t.Measured[i], t.Model[i], t.Residual[i]
			row := residualRow{
				File: harmless(s.File), Part: harmless(s.Part), Freq: csvNumber(f),
				Z: csvNumber(cmplx.Abs(z)), Phase: csvNumber(Phase(z)), R: csvNumber(real(z)), X: csvNumber(imag(z)),
				ModelZ: csvNumber(cmplx.Abs(m)), ModelPh: csvNumber(Phase(m)), ModelR: csvNumber(real(m)), ModelX: csvNumber(imag(m)),
				Residual: csvNumber(real(r)), Angle: csvNumber(degrees * imag(r)),
			}
			if t.MeterMagnitude != nil && finite(t.MeterMagnitude[i]) != nil {
				magnitude, phase := csvNumber(t.MeterMagnitude[i]), csvNumber(degrees*t.MeterPhase[i])
				row.MeterZ, row.MeterPh = &magnitude, &phase
			}
			rows = append(rows, row)
		}
	}
	return gocsv.MarshalCSV(rows, gocsv.NewSafeCSVWriter(csv.NewWriter(w)))
}
