// Package setup turns a bench file into a rig: it reads the file strictly,
// finds its contradictions before a port is opened, and opens the instruments.
//
// It measures nothing and knows no procedure. Order of use: Load, then
// File.Open with the ports of this machine or of the simulated bench.
package setup

import (
	"time"

	"kymobench/bench/quantity"
)

// File is a bench file, read and found free of contradictions. Stated values
// are kept as the text they were stated in, which goes into the record; each
// was parsed once, so that it cannot fail later.
type File struct {
	Name   string // as given to Load
	Source []byte
	SHA256 string

	Department string
	Bench      string
	Simulated  bool
	Keys       string // folder of keys, relative to the file; "" when none is named

	Highest, Lowest quantity.Pressure // never to be exceeded
	Volume          string

	OwnLeak, OwnLeakUncertainty string // of pressure per second, standard; "" when not stated

	Reference Reference
	UUT       UUT
	Applied   *Applied // nil when it is not measured
	Readout   *Readout // nil when the UUT puts out pressure
	Others    []Place  // further UUTs on the same manifold
	Pressure  Source
	Valve     Valve
}

// Dialogue is the port of an instrument and how it is asked.
type Dialogue struct {
	Name   string
	Family string
	Mode   string // "asked" or "free-running"; "" of a relay
	Port   string
	PortMode
	Terminator   string // "" is LF
	Echo         bool
	Identify     string // question, "" when it cannot be asked
	Identity     string // the answer expected
	Uptime       string // question, "" when it cannot be asked
	Clear        string
	Errors       string
	Acknowledged string // what commands are answered, "" when nothing is
	Within       time.Duration
	Station      int    // of Modbus
	Order        string // of the bytes of its numbers
}

// Text says that what goes over the port is text.
func (d Dialogue) Text() bool { return d.Family != familyFrames && d.Family != familyModbus }

// PortMode is how characters go over a port.
type PortMode struct {
	Baud     int
	DataBits int    // 7 or 8
	Parity   string // "none", "odd", "even", "mark" or "space"
	StopBits int    // 1 or 2
}

// Reference is the reference manometer.
type Reference struct {
	Dialogue
	Read  string
	Zero  string
	Field quantity.Field

	Resolution, ResponseTime, ResponseTimeTolerance, RangeLow, RangeHigh, Height string

	// Lag is how far the reference follows a slow change behind, with its
	// standard uncertainty; "" when all that is stated is the response time.
	Lag, LagUncertainty string

	Certificate Certificate
}

// Certificate of the reference; Uncertainty and UncertaintyOfReading are
// expanded with CoverageFactor.
type Certificate struct {
	Number, Laboratory, Date, Due                   string
	CoverageFactor                                  float64
	Uncertainty, UncertaintyOfReading, DriftPercent string
	DriftOfReadingPerYear, DriftPerYear             string
	TemperatureOfReading                            string
	Corrections                                     []Correction
}

// Correction is what to add to a reading at a pressure.
type Correction struct{ At, Correction string }

// UUT is how the output of the unit under test is read.
type UUT struct {
	Dialogue
	Read  string // question, "" when it sends by itself
	Field quantity.Field

	Resolution, SamplePeriod, SamplePeriodTolerance, Excitation, NominalSensitivity string
	Height, HeightUncertainty, Fluid, Delay, DelayUncertainty                       string

	FluidDensity float64 // kg/m3, 0 when no fluid is named
}

// Applied is the applied pressure, measured where the step enters, on the UUT's
// converter clock.
type Applied struct {
	Field      quantity.Field
	Resolution string
}

// Place is one place on the manifold for a UUT.
type Place struct {
	Name    string // "" of the only one
	UUT     UUT
	Readout *Readout
}

// Places are all places on the manifold, that of [uut] first.
func (f *File) Places() []Place {
	first := Place{UUT: f.UUT, Readout: f.Readout}
	if len(f.Others) > 0 {
		first.Name = "1"
	}
	return append([]Place{first}, f.Others...)
}

// Readout turns the bridge into numbers. Port is "" when it cannot be asked.
type Readout struct {
	Dialogue
	GainUncertainty, ZeroUncertainty string // expanded
	ExcitationUncertainty            string // expanded, "" when not stated
	CoverageFactor                   float64
	Certificate, Due                 string
	Filters                          []string // as stated, "low_pass 200 Hz"
	FiltersStated                    bool     // they are all, also when there are none
}

// Source makes the pressure.
type Source struct {
	Dialogue
	Set, Hold, Vent string
}

// Valve makes the step.
type Valve struct {
	Dialogue
	Release, Shut               string
	EdgeTime, EdgeTimeTolerance string
}

// fluidDensity in kg/m3 at about 20 degC: water 998.2071 (as conventional
// tables have it), saline 0.9 % 1004.6 (from memory), air 1.2 (from memory).
func fluidDensity(name string) float64 {
	switch name {
	case "water":
		return 998.2071
	case "saline":
		return 1004.6
	case "air":
		return 1.2
	}
	return 0
}
