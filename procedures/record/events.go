package record

import (
	"encoding/json"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// The kinds of event a record holds, each with its payload type. Quantities
// stand as text with their unit ("300 mmHg"), as they stand in the files they
// come from, so that a record can be read by eye; samples keep the text as
// received from the instrument.
const (
	KindOpened      = "opened"      // Opened, always the first line
	KindProcedure   = "procedure"   // File
	KindBenchFile   = "bench_file"  // File
	KindUUT         = "uut"         // UUT
	KindReference   = "reference"   // Reference
	KindReadout     = "readout"     // Readout
	KindSource      = "source"      // Instrument
	KindValve       = "valve"       // Valve
	KindWarnings    = "warnings"    // Warnings
	KindPrompt      = "prompt"      // Prompt
	KindAnswer      = "answer"      // Answer
	KindStage       = "stage"       // Stage
	KindReading     = "reading"     // Reading
	KindBlock       = "block"       // Block
	KindZeroing     = "zeroing"     // Zeroing
	KindPoint       = "point"       // Point
	KindHold        = "hold"        // Hold
	KindCapture     = "capture"     // Capture
	KindLine        = "line"        // Line
	KindPulse       = "pulse"       // Pulse
	KindClock       = "clock"       // Clock
	KindVent        = "vent"        // Vent
	KindVoid        = "void"        // Void
	KindFault       = "fault"       // Fault
	KindReservation = "reservation" // Reservation
	KindOverride    = "override"    // Override
	KindFinished    = "finished"    // Finished
	KindRecovered   = "recovered"   // Recovered
	KindResults     = "results"     // StoredResults, the last line but one
	KindClosed      = "closed"      // Closed, always the last line
)

// Schema is the format of the record, in its first line.
const Schema = "kymobench/record/1"

// Opened is the first line of every record.
type Opened struct {
	Schema     string `json:"schema"`
	Run        string `json:"run"`
	Counter    int64  `json:"counter"`       // of this bench's runs, from 1
	Previous   string `json:"previous_head"` // hash of the run before, "" for the first
	Program    string `json:"program"`       // name and version
	Department string `json:"department"`
	Bench      string `json:"bench"`
	Operator   string `json:"operator"`
	Simulated  bool   `json:"simulated"`
	Seed       uint64 `json:"seed,omitempty"` // of a simulated bench in memory
}

// File is a file the run used, whole.
type File struct {
	Name     string `json:"name"`
	ID       string `json:"id,omitempty"`
	Revision int64  `json:"revision,omitempty"`
	Title    string `json:"title,omitempty"`
	SHA256   string `json:"sha256"`
	Text     string `json:"text"`
}

// Instrument is an instrument as the bench file describes it, with the
// identity it answered.
type Instrument struct {
	Role     string `json:"role"`
	Name     string `json:"name"`
	Family   string `json:"family"`
	Port     string `json:"port"`
	Identity string `json:"identity"` // as answered, "" when it cannot be asked
	Uptime   string `json:"uptime,omitempty"`
}

// UUT is the unit under test and how its output is read.
type UUT struct {
	SerialNumber          string         `json:"serial_number"`
	Model                 string         `json:"model,omitempty"`
	Lot                   string         `json:"lot,omitempty"`
	Is                    string         `json:"is"`              // bare transducer, transducer with cable and channel, channel
	Place                 string         `json:"place,omitempty"` // on the manifold, when there are several
	Family                string         `json:"family,omitempty"`
	Port                  string         `json:"port,omitempty"`
	Field                 quantity.Field `json:"field"`
	Resolution            string         `json:"resolution,omitempty"`
	Excitation            string         `json:"excitation,omitempty"`
	NominalSensitivity    string         `json:"nominal_sensitivity,omitempty"`
	Repeatability         string         `json:"repeatability,omitempty"` // of a single reading, a standard deviation stated beforehand
	SamplePeriod          string         `json:"sample_period,omitempty"`
	SamplePeriodTolerance string         `json:"sample_period_tolerance,omitempty"` // half-width, a share ("0.01 %")
	Height                string         `json:"height,omitempty"`
	HeightUncertainty     string         `json:"height_uncertainty,omitempty"` // standard
	Fluid                 string         `json:"fluid,omitempty"`
	FluidDensity          float64        `json:"fluid_density_kg_m3,omitempty"`
	Delay                 string         `json:"delay,omitempty"`
	DelayUncertainty      string         `json:"delay_uncertainty,omitempty"`
}

// Reference is the reference manometer with its certificate.
type Reference struct {
	Instrument
	Field                 quantity.Field `json:"field"`
	Resolution            string         `json:"resolution,omitempty"`
	ResponseTime          string         `json:"response_time,omitempty"`
	ResponseTimeTolerance string         `json:"response_time_tolerance,omitempty"`
	Lag                   string         `json:"lag,omitempty"`             // behind a slow change; readings are corrected for it
	LagUncertainty        string         `json:"lag_uncertainty,omitempty"` // standard
	RangeLow              string         `json:"range_low,omitempty"`
	RangeHigh             string         `json:"range_high,omitempty"`
	Height                string         `json:"height,omitempty"`
	Certificate           Certificate    `json:"certificate"`
}

// Certificate is what the reference's calibration certificate states.
type Certificate struct {
	Number               string  `json:"number,omitempty"`
	Laboratory           string  `json:"laboratory,omitempty"`
	Date                 string  `json:"date,omitempty"`
	Due                  string  `json:"due,omitempty"`
	CoverageFactor       float64 `json:"coverage_factor,omitempty"`
	Uncertainty          string  `json:"uncertainty,omitempty"`            // expanded, at each set pressure
	UncertaintyOfReading string  `json:"uncertainty_of_reading,omitempty"` // expanded, a share common to all readings
	DriftOfReading       string  `json:"drift_of_reading,omitempty"`       // half-width since its date, a share
	// Half-widths for each year since its date: a share of the reading, and a pressure.
	DriftOfReadingPerYear string       `json:"drift_of_reading_per_year,omitempty"`
	DriftPerYear          string       `json:"drift_per_year,omitempty"`
	TemperatureOfReading  string       `json:"temperature_of_reading,omitempty"` // half-width, a share: bench against laboratory
	Corrections           []Correction `json:"corrections,omitempty"`
}

// Correction says what to add to a reading at a pressure.
type Correction struct {
	At         string `json:"at"`
	Correction string `json:"correction"`
}

// Readout is what turns the bridge's output into numbers.
type Readout struct {
	Instrument
	Certificate     string  `json:"certificate,omitempty"`
	Due             string  `json:"due,omitempty"`
	CoverageFactor  float64 `json:"coverage_factor,omitempty"`
	GainUncertainty string  `json:"gain_uncertainty,omitempty"` // expanded, a share
	ZeroUncertainty string  `json:"zero_uncertainty,omitempty"` // expanded
	// ExcitationUncertainty is expanded, a share; of a voltage output it counts like a gain.
	ExcitationUncertainty string `json:"excitation_uncertainty,omitempty"`
	// Filters of its signal path, "low_pass 200 Hz", "average 4 ms x3", "delay
	// 2 ms"; FiltersStated: they are known to be all, also when there are none.
	Filters       []string `json:"filters,omitempty"`
	FiltersStated bool     `json:"filters_stated,omitempty"`
}

// Valve is what makes the step.
type Valve struct {
	Instrument
	EdgeTime          string `json:"edge_time,omitempty"`           // 10-90 %
	EdgeTimeTolerance string `json:"edge_time_tolerance,omitempty"` // half-width, a share
}

// Warnings are the safety warnings shown and how they were acknowledged.
type Warnings struct {
	Lines        []string `json:"lines"`
	Acknowledged string   `json:"acknowledged"`
}

// Prompt is a question to the operator.
type Prompt struct {
	Text string `json:"text"`
}

// Answer is the operator's line.
type Answer struct {
	Text string `json:"text"`
	End  bool   `json:"end,omitempty"` // the input ended instead
}

// Stage marks where a stage of the procedure begins and ends.
type Stage struct {
	Number int    `json:"number"` // from 1, in the procedure's order
	Kind   string `json:"kind"`
	Phase  string `json:"phase"` // begin, end, abandoned
	Why    string `json:"why,omitempty"`
}

// Reading is one asked reading; the line's own time is when its last byte was
// taken. Watch summarises what the UUT sent since the reading before.
type Reading struct {
	Role  string       `json:"role"`
	Sent  line.Instant `json:"sent"`
	Text  string       `json:"text"`
	Watch *Watch       `json:"watch,omitempty"`
}

// Watch summarises the UUT's samples between two readings of the reference, in
// mmHg at the nominal sensitivity, before zeroing.
type Watch struct {
	N       int     `json:"n"`
	Mean    float64 `json:"mean"`
	SD      float64 `json:"sd"`
	Min     float64 `json:"min"`
	Max     float64 `json:"max"`
	Refused int     `json:"refused,omitempty"`
}

// BlockSize is the most samples one Block holds.
const BlockSize = 250

// Block is a stretch of samples of a free-running instrument, as received.
type Block struct {
	Role    string       `json:"role"`
	Start   line.Instant `json:"start"`  // arrival of the first sample
	Period  string       `json:"period"` // of the samples, as used ("1 ms")
	Samples []string     `json:"samples"`
}

// Zeroing says that an instrument was zeroed.
type Zeroing struct {
	Role string `json:"role"`
	How  string `json:"how"` // device, arithmetic
}

// Point is one point taken: the lines of the reference readings and sample
// blocks it stands on. Purpose is "zero" for the reading before zeroing and
// "static" for a point of a cycle.
type Point struct {
	Purpose  string  `json:"purpose"`
	Stage    int     `json:"stage"`
	Cycle    int     `json:"cycle,omitempty"`    // from 1
	Leg      string  `json:"leg,omitempty"`      // up, down
	Set      string  `json:"set,omitempty"`      // "" when the data state none
	Mounting int     `json:"mounting,omitempty"` // from 1; 0: the UUT was mounted once
	Readings []int64 `json:"readings"`
	Blocks   []int64 `json:"blocks,omitempty"`
	// Text of a single UUT reading, for data that have no blocks.
	UUT        string `json:"uut,omitempty"`
	Excitation string `json:"excitation,omitempty"` // measured with this reading, if it was
	Ready      string `json:"ready,omitempty"`      // what was waited for, in words

	// WrongSide is how far the pressure had been beyond the set pressure on the
	// way to it ("1.4 mmHg"); "" within the procedure's threshold. The point's
	// hysteresis is not the UUT's alone and does not count.
	WrongSide string   `json:"wrong_side,omitempty"`
	Settled   *Settled `json:"settled,omitempty"`
}

// Settled is what the difference rule found in the window of a point when it
// took it; mmHg and seconds. The standard uncertainties are those that the rule
// decided on; what counts in a budget is worked out anew from the readings.
type Settled struct {
	Readings      int     `json:"readings"`
	Seconds       float64 `json:"seconds"`
	Slope         float64 `json:"slope"` // of the reference, mean over the window, mmHg/s
	SlopeStandard float64 `json:"slope_standard_uncertainty"`
	Trend         float64 `json:"trend"` // of UUT minus reference, mmHg/s
	TrendStandard float64 `json:"trend_standard_uncertainty"`
	Correlation   float64 `json:"correlation"`          // variance of the mean over that of white noise
	Noise         float64 `json:"noise_uncertainty"`    // of the mean difference
	Delay         float64 `json:"settling_uncertainty"` // slope x uncertainty of lag and skew
	Standard      float64 `json:"standard_uncertainty"` // of the mean difference, all parts
}

// Hold is the leak test: the source shut off, the reference read.
type Hold struct {
	Stage    int     `json:"stage"`
	Set      string  `json:"set"`
	Readings []int64 `json:"readings"`
	// As the bench file states them: the gas volume that was shut off, and what
	// the bench loses by itself with the UUT's place closed off.
	Volume             string `json:"volume,omitempty"`               // "60 mL"
	OwnRate            string `json:"own_rate,omitempty"`             // "0.002 mmHg/s"
	OwnRateUncertainty string `json:"own_rate_uncertainty,omitempty"` // standard
}

// Capture is one step: the lines of its sample blocks, in order. Applied
// blocks hold the applied pressure on the same clock, if it was measured.
type Capture struct {
	Stage     int          `json:"stage"`
	Number    int          `json:"number"` // from 1
	Direction string       `json:"direction,omitempty"`
	Size      string       `json:"size,omitempty"`
	Commanded line.Instant `json:"commanded,omitempty"`
	Blocks    []int64      `json:"blocks"`
	Applied   []int64      `json:"applied,omitempty"`
	// AppliedUnfiltered: the readout's filters do not act on the applied pressure.
	AppliedUnfiltered bool   `json:"applied_unfiltered,omitempty"`
	Edge              string `json:"edge,omitempty"` // stated for this data; "" fitted or measured, else a time ("0 s" ideal)
}

// Line is what is stated of the pressure line of data that come without a
// procedure; a procedure's step stage says the same.
type Line struct {
	Place             string `json:"place,omitempty"` // where the step enters
	Length            string `json:"length,omitempty"`
	Bore              string `json:"bore,omitempty"`
	Fluid             string `json:"fluid,omitempty"`
	FlushDevice       string `json:"flush_device,omitempty"`
	FluidDensity      string `json:"fluid_density,omitempty"`
	FluidViscosity    string `json:"fluid_viscosity,omitempty"`
	DesignedFrequency string `json:"designed_frequency,omitempty"` // clean and free of air
	DesignedDamping   string `json:"designed_damping,omitempty"`
	Barometer         string `json:"barometer,omitempty"` // absolute
}

// Pulse is what somebody wants to know of the line in place of what the program
// would tell: the pulse wave that errors are worked out for, and frequencies.
type Pulse struct {
	Shape          string    `json:"shape,omitempty"` // one of the program's, or the name of Samples
	Rate           string    `json:"rate,omitempty"`  // that the plane is drawn for, "120 1/min"
	Tolerance      string    `json:"tolerance,omitempty"`
	ToleranceShare string    `json:"tolerance_share,omitempty"`
	Unit           string    `json:"unit,omitempty"` // of Samples
	Samples        []float64 `json:"samples,omitempty"`
	At             []string  `json:"at,omitempty"` // frequencies that gain and phase are wanted at
}

// Vent says that the volume was opened to atmosphere, and why.
type Vent struct {
	Why string `json:"why"`
}

// Clock is the sample clock of an instrument that sends by itself, as recovered
// from when its readings arrived at this machine.
type Clock struct {
	Role        string    `json:"role"`
	Period      string    `json:"period"`
	Uncertainty string    `json:"uncertainty"` // standard, against this machine's clock
	Readings    int64     `json:"readings"`
	Suspects    []Suspect `json:"suspects,omitempty"`
}

// Suspect is a place where readings seem to be missing, or below 0 doubled.
type Suspect struct {
	After    int64   `json:"after"` // noticed after this reading of the stream
	Readings float64 `json:"readings"`
}

// Void says that what was taken from a line on does not count: the run was
// interrupted there and took it again. The lines stay in the record.
type Void struct {
	Since int64  `json:"since"` // points, holds and captures of this line or later
	Why   string `json:"why"`
}

// Fault is something of the bench or the run, never of the UUT, that leaves
// the run inconclusive.
type Fault struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Reservation weakens a result without stopping it.
type Reservation struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Override is a rule of the house that somebody set aside for this run.
type Override struct {
	Code   string `json:"code"`   // certificate_overdue
	Text   string `json:"text"`   // what was set aside
	Reason string `json:"reason"` // as typed
}

// Finished ends the measuring: complete, or stopped with a code.
type Finished struct {
	Complete bool   `json:"complete"`
	Code     string `json:"code,omitempty"`
	Text     string `json:"text,omitempty"`
}

// Recovered says what was set aside when an open record was taken up again.
type Recovered struct {
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"`
	File   string `json:"file"`
}

// StoredResults are the Results as computed by the build that closed the record.
type StoredResults struct {
	Version int             `json:"version"` // of the computation
	Layout  int             `json:"layout"`  // page layout the report is made with
	JSON    json.RawMessage `json:"results"`
}

// Closed is the last line.
type Closed struct {
	Lines int64 `json:"lines"` // with this one
}
