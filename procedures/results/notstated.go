package results

import "kymobench/bench/quantity"

// notStated lists what belongs into the budgets of this record and nobody
// stated. Nothing is put in its place.
func (g *gathered) notStated(s *scale) []Reason {
	out := []Reason{}
	need := func(stated bool, code, text string) {
		if !stated {
			out = append(out, Reason{code, text})
		}
	}
	c := g.reference.Certificate
	need(s.pointwise.standard > 0 || s.share.standard > 0, "reference_uncertainty", "the uncertainty of the reference's certificate, with its coverage factor")
	need(len(c.Corrections) > 0, "reference_corrections", "corrections of the reference: its readings are taken as they are")
	need(c.DriftOfReading != "" || (c.DriftOfReadingPerYear != "" || c.DriftPerYear != "") && c.Date != "" && !g.began.IsZero(), "reference_drift",
		"the drift of the reference since the date of its certificate")
	need(c.TemperatureOfReading != "", "reference_temperature", "what the temperature of the bench does to the reference")
	need(s.resolutionReference > 0, "reference_resolution", "the resolution of the reference")
	need(s.resolutionUUT > 0, "uut_resolution", "the resolution of the UUT's readings")
	if s.nominal > 0 {
		need(s.gain.standard > 0, "readout_gain", "the uncertainty of the readout's gain")
		need(s.zeroOf.standard > 0, "readout_zero", "the uncertainty of the readout's zero, which the zero offset needs")
		need(s.uutUnit.Dimension != quantity.DimVoltage || s.volts.standard > 0, "excitation", "the uncertainty of the excitation")
	}
	need(g.uut.FluidDensity > 0 && g.uut.HeightUncertainty != "", "head", "the heights of reference and diaphragm and the fluid between them, which the zero offset needs")
	single := len(g.points) > 0 && g.points[0].UUT != ""
	need(s.delay > 0 && !single, "timing", "when the readings were taken, and how far the reference lags: what was left of the settling")
	return out
}
