package main

import (
	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/run"
)

// factsOf puts what a bench file states into the words of the record.
func factsOf(f *setup.File, d *procedures.Definition, serial string, marks marks) run.Facts {
	instrument := func(role string, d setup.Dialogue) record.Instrument {
		return record.Instrument{Role: role, Name: d.Name, Family: d.Family, Port: d.Port}
	}
	ref, uut := f.Reference, f.UUT
	facts := run.Facts{
		Highest: f.Highest, Lowest: f.Lowest,
		Reference: record.Reference{
			Instrument: instrument("reference", ref.Dialogue), Field: ref.Field, Resolution: ref.Resolution,
			ResponseTime: ref.ResponseTime, ResponseTimeTolerance: ref.ResponseTimeTolerance,
			RangeLow: ref.RangeLow, RangeHigh: ref.RangeHigh, Height: ref.Height,
			Certificate: record.Certificate{
				Number: ref.Certificate.Number, Laboratory: ref.Certificate.Laboratory, Date: ref.Certificate.Date, Due: ref.Certificate.Due,
				CoverageFactor: ref.Certificate.CoverageFactor, Uncertainty: ref.Certificate.Uncertainty,
				UncertaintyOfReading: ref.Certificate.UncertaintyOfReading, DriftOfReading: ref.Certificate.DriftPercent,
			},
		},
		UUT: record.UUT{
			SerialNumber: serial, Model: marks.model, Lot: marks.lot, Is: string(d.UUTKind), Family: uut.Family, Port: uut.Port, Field: uut.Field,
			Resolution: uut.Resolution, Excitation: uut.Excitation, NominalSensitivity: uut.NominalSensitivity,
			SamplePeriod: uut.SamplePeriod, SamplePeriodTolerance: uut.SamplePeriodTolerance,
			Height: uut.Height, HeightUncertainty: uut.HeightUncertainty, Fluid: uut.Fluid, FluidDensity: uut.FluidDensity,
			Delay: uut.Delay, DelayUncertainty: uut.DelayUncertainty,
		},
		Source: instrument("source", f.Pressure.Dialogue),
		Valve: record.Valve{
			Instrument: instrument("valve", f.Valve.Dialogue), EdgeTime: f.Valve.EdgeTime, EdgeTimeTolerance: f.Valve.EdgeTimeTolerance,
		},
	}
	for _, c := range ref.Certificate.Corrections {
		facts.Reference.Certificate.Corrections = append(facts.Reference.Certificate.Corrections, record.Correction{At: c.At, Correction: c.Correction})
	}
	if r := f.Readout; r != nil {
		facts.Readout = &record.Readout{
			Instrument: instrument("readout", r.Dialogue), Certificate: r.Certificate, Due: r.Due, CoverageFactor: r.CoverageFactor,
			GainUncertainty: r.GainUncertainty, ZeroUncertainty: r.ZeroUncertainty,
		}
	}
	return facts
}

// marks are what stands on the UUT beside its serial number.
type marks struct{ model, lot string }
