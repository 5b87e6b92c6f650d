package main

import (
	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/run"
)

// instrumentOf puts what every instrument has into the words of the record.
func instrumentOf(role string, d setup.Dialogue) record.Instrument {
	return record.Instrument{Role: role, Name: d.Name, Family: d.Family, Port: d.Port}
}

// factsOf puts what a bench file states into the words of the record.
func factsOf(f *setup.File) run.Facts {
	ref := f.Reference
	facts := run.Facts{
		Highest: f.Highest, Lowest: f.Lowest, Volume: f.Volume, OwnLeak: f.OwnLeak, OwnLeakUncertainty: f.OwnLeakUncertainty,
		Reference: record.Reference{
			Instrument: instrumentOf("reference", ref.Dialogue), Field: ref.Field, Resolution: ref.Resolution,
			ResponseTime: ref.ResponseTime, ResponseTimeTolerance: ref.ResponseTimeTolerance,
			Lag: ref.Lag, LagUncertainty: ref.LagUncertainty,
			RangeLow: ref.RangeLow, RangeHigh: ref.RangeHigh, Height: ref.Height,
			Certificate: record.Certificate{
				Number: ref.Certificate.Number, Laboratory: ref.Certificate.Laboratory, Date: ref.Certificate.Date, Due: ref.Certificate.Due,
				CoverageFactor: ref.Certificate.CoverageFactor, Uncertainty: ref.Certificate.Uncertainty,
				UncertaintyOfReading: ref.Certificate.UncertaintyOfReading, DriftOfReading: ref.Certificate.DriftPercent,
				DriftOfReadingPerYear: ref.Certificate.DriftOfReadingPerYear, DriftPerYear: ref.Certificate.DriftPerYear,
				TemperatureOfReading: ref.Certificate.TemperatureOfReading,
			},
		},
		Source: instrumentOf("source", f.Pressure.Dialogue),
		Valve: record.Valve{
			Instrument: instrumentOf("valve", f.Valve.Dialogue), EdgeTime: f.Valve.EdgeTime, EdgeTimeTolerance: f.Valve.EdgeTimeTolerance,
		},
	}
	for _, c := range ref.Certificate.Corrections {
		facts.Reference.Certificate.Corrections = append(facts.Reference.Certificate.Corrections, record.Correction{At: c.At, Correction: c.Correction})
	}
	return facts
}

// subjectOf is the UUT at a place of the bench.
func subjectOf(p setup.Place, d *procedures.Definition, m marks) run.Subject {
	uut := p.UUT
	subject := run.Subject{UUT: record.UUT{
		SerialNumber: m.serial, Model: m.model, Lot: m.lot, Is: string(d.UUTKind), Place: p.Name, Family: uut.Family, Port: uut.Port, Field: uut.Field,
		Resolution: uut.Resolution, Excitation: uut.Excitation, NominalSensitivity: uut.NominalSensitivity,
		SamplePeriod: uut.SamplePeriod, SamplePeriodTolerance: uut.SamplePeriodTolerance,
		Height: uut.Height, HeightUncertainty: uut.HeightUncertainty, Fluid: uut.Fluid, FluidDensity: uut.FluidDensity,
		Delay: uut.Delay, DelayUncertainty: uut.DelayUncertainty,
	}}
	if r := p.Readout; r != nil {
		subject.Readout = &record.Readout{
			Instrument: instrumentOf("readout", r.Dialogue), Certificate: r.Certificate, Due: r.Due, CoverageFactor: r.CoverageFactor,
			GainUncertainty: r.GainUncertainty, ZeroUncertainty: r.ZeroUncertainty, ExcitationUncertainty: r.ExcitationUncertainty,
			Filters: r.Filters, FiltersStated: r.FiltersStated,
		}
	}
	return subject
}

// marks are what stands on a UUT.
type marks struct{ serial, model, lot string }
