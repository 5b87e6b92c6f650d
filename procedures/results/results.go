// Package results computes the Results of a run from the events of its record,
// and nothing else computes a result: run, fit, reports and verify all use it.
//
// It does no measuring and writes no record. It compares nothing itself;
// verdict does.
//
// Order of use: Compute on the events of a record; Encode for the line that
// stores them; Decode and Compare when they are verified.
package results

import "kymobench/procedures/verdict"

// Version is the version of the computation, stored with every Results.
const Version = 1

// Results is everything that a run found.
type Results struct {
	Verdict      verdict.Verdict `json:"verdict"`
	Reasons      []Reason        `json:"reasons"`
	Limits       []Limit         `json:"limits"`
	Static       *Static         `json:"static"`
	Step         *Step           `json:"step"`
	Leak         *Leak           `json:"leak"`
	Reservations []Reason        `json:"reservations"` // of the run; Static and Step hold their own
	Curve        []ErrorPoint    `json:"error_curve"`
	Budgets      []Budget        `json:"budgets"`    // of every static figure
	NotStated    []Reason        `json:"not_stated"` // what would belong into them and nobody stated
	Traces       []StepTrace     `json:"step_traces"`
}

// Reason is a code for programs and a text for people.
type Reason struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Bounds are the two sides of a limit; nil where there is none.
type Bounds struct {
	Low  *float64 `json:"low"`
	High *float64 `json:"high"`
}

// Limit is one result held against one limit. Value is nil when undetermined.
type Limit struct {
	Name        string          `json:"name"`
	Value       *float64        `json:"value"`
	Unit        string          `json:"unit"`
	Expanded    *float64        `json:"expanded_uncertainty"` // half-width of the 95 % interval
	Bounds      Bounds          `json:"limit"`
	Outcome     verdict.Outcome `json:"outcome"`
	FalseAccept *float64        `json:"false_accept_probability"`

	At         *float64     `json:"at"` // the set pressure it was found at, where there is one, in mmHg
	Rule       string       `json:"rule"`
	GuardBand  float64      `json:"guard_band"`
	Resolution float64      `json:"resolution"`
	Origin     string       `json:"origin"`
	Known      string       `json:"known"`  // how the origin is known
	Reason     string       `json:"reason"` // why undetermined, or what decided
	Standard   *float64     `json:"standard_uncertainty"`
	DoF        *float64     `json:"degrees_of_freedom"` // nil: infinite
	Coverage   *float64     `json:"coverage_factor"`
	Sampled    *MonteCarlo  `json:"monte_carlo"` // set when Expanded is by Monte Carlo
	Budget     []BudgetLine `json:"budget"`

	FalseReject *float64 `json:"false_reject_probability"`
	// Needed is the expanded uncertainty with which this value would have been
	// decided without condition; nil when it was, or when none would do.
	Needed *float64 `json:"needed_expanded_uncertainty"`

	at int // of accuracy: the point that decided it, -1 for none
}

// BudgetLine is one contribution to an uncertainty.
type BudgetLine struct {
	Name         string   `json:"name"`
	Source       string   `json:"source"` // certificate, bench file, this run
	Distribution string   `json:"distribution"`
	Standard     float64  `json:"standard_uncertainty"` // of the input, in Unit
	Unit         string   `json:"unit"`
	Stated       float64  `json:"stated"`  // the number it was made from, in Unit
	Divisor      float64  `json:"divisor"` // and what that was divided by
	Sensitivity  float64  `json:"sensitivity"`
	Contribution float64  `json:"contribution"` // in the limit's unit
	DoF          *float64 `json:"degrees_of_freedom"`
}

// Figure is a value with its standard uncertainty.
type Figure struct {
	Value    float64 `json:"value"`
	Standard float64 `json:"standard_uncertainty"`
}

// Static is what the static readings gave; a figure they cannot give is nil.
type Static struct {
	Unit           string        `json:"pressure_unit"`
	Readings       int           `json:"readings"`
	Cycles         int           `json:"cycles"`
	Intercept      *Figure       `json:"intercept"`
	Slope          *Figure       `json:"slope"`
	ResidualSD     *float64      `json:"residual_standard_deviation"`
	Covariance     *float64      `json:"covariance_intercept_slope"`
	Sensitivity    *Sensitivity  `json:"sensitivity"`
	ZeroOffset     *Value        `json:"zero_offset"`
	ZeroReturn     []*float64    `json:"zero_return"`
	Linearity      Linearity     `json:"linearity"`
	Hysteresis     *Located      `json:"hysteresis"`
	Repeatability  Repeatability `json:"repeatability"`
	LargestError   *ErrorAt      `json:"largest_error"`
	ErrorAfterZero *ErrorAt      `json:"largest_error_after_zero"`
	Reservations   []Reason      `json:"reservations"`
	NominalUsed    *float64      `json:"nominal_sensitivity_uV_V_mmHg"` // nil for a pressure output

	CycleNumbers    []int          `json:"cycle_numbers"` // zero_return goes by them
	ResidualDoF     *int           `json:"residual_degrees_of_freedom"`
	Lines           Lines          `json:"linearity_lines"`
	EachHysteresis  []HysteresisAt `json:"hysteresis_each"`
	DifferenceSD    *float64       `json:"difference_standard_deviation"` // of two readings: of a hysteresis or zero return, by noise alone
	Reproducibility *float64       `json:"reproducibility"`
	Points          []SetPressure  `json:"set_pressures"`
	AsRead          *Extremes      `json:"errors_as_read"`
	AfterZero       *Extremes      `json:"errors_after_zero"`
	Curvature       *Curvature     `json:"curvature"`
	Weighted        *WeightedLine  `json:"weighted_line"` // nil unless the noise grows with the pressure
	Undetermined    []Undetermined `json:"undetermined"`
}

// Value is a bare figure.
type Value struct {
	Value float64 `json:"value"`
}

// Sensitivity is the slope times the nominal sensitivity.
type Sensitivity struct {
	Value    float64 `json:"value"`
	Unit     string  `json:"unit"`
	Standard float64 `json:"standard_uncertainty"`
}

// Linearity is four numbers, each about its own line.
type Linearity struct {
	Independent  *float64 `json:"independent"`
	Terminal     *float64 `json:"terminal"`
	ZeroBased    *float64 `json:"zero_based"`
	LeastSquares *float64 `json:"least_squares"`
}

// Located is the largest of a figure, and its set pressure.
type Located struct {
	Largest float64 `json:"largest"`
	At      float64 `json:"at"`
}

// Repeatability is nil where one cycle cannot give it.
type Repeatability struct {
	LargestRange *float64 `json:"largest_range"`
	PooledSD     *float64 `json:"pooled_standard_deviation"`
	DoF          *int     `json:"degrees_of_freedom"`
}

// ErrorAt is an error and where it was found.
type ErrorAt struct {
	Value float64  `json:"value"`
	At    *float64 `json:"at"`
	Cycle int      `json:"cycle"`
	Leg   string   `json:"leg"`
}

// Step is what the step responses gave.
type Step struct {
	Unit         string       `json:"pressure_unit"`
	SampleRate   float64      `json:"sample_rate_hz"`
	Steps        []StepFigure `json:"steps"`
	Combined     Combined     `json:"combined"`
	Reservations []Reason     `json:"reservations"`
	Line         *StatedLine  `json:"line"`     // nil when nothing is stated of it
	Derived      *Derived     `json:"derived"`  // these and all below nil when undetermined
	Response     *Response    `json:"response"` // of the line without a model, as a check
	Pulse        *PulseErrors `json:"pulse"`
	Opinions     *Opinions    `json:"opinions"`
	Stopping     *Stopping    `json:"stopping"` // nil without limits that the steps decide
}

// Stopping is how the number of steps was found, and what they leave open.
type Stopping struct {
	Least int         `json:"least_steps"` // 0: the number was fixed
	Most  int         `json:"most_steps"`
	Taken int         `json:"determined_steps"`
	Wider float64     `json:"interval_factor"` // of the steps' part, for looking after every step
	Open  []OpenLimit `json:"open"`
}

// OpenLimit is a dynamic limit that the steps do not decide.
type OpenLimit struct {
	Limit string `json:"limit"`
	More  *int   `json:"more_steps"` // that would decide it, as it looks now; nil when no number allowed would
}

// StepFigure is one step; its estimates are nil when undetermined.
type StepFigure struct {
	At         float64   `json:"at_s"`
	Determined bool      `json:"determined"`
	Reasons    []string  `json:"reasons"`
	Height     *float64  `json:"height"`
	Noise      *float64  `json:"noise"`
	Frequency  *Estimate `json:"natural_frequency_hz"`
	Damping    *Estimate `json:"damping_ratio"`
}

// Combined is what the determined steps say together.
type Combined struct {
	Determined bool      `json:"determined"`
	Reasons    []string  `json:"reasons"`
	Frequency  *Estimate `json:"natural_frequency_hz"`
	Damping    *Estimate `json:"damping_ratio"`
}

// Estimate is a value, its standard uncertainty and its 95 % interval.
type Estimate struct {
	Value    float64    `json:"value"`
	Standard float64    `json:"standard_uncertainty"`
	Interval [2]float64 `json:"interval95"`
}

// Leak is what the hold gave, in mmHg/s; positive is a loss of pressure.
type Leak struct {
	Set      float64  `json:"set_mmHg"`
	Rate     *float64 `json:"rate_mmHg_s"`
	Expanded *float64 `json:"expanded_uncertainty"`
	Highest  float64  `json:"highest_mmHg_s"`
	Seconds  float64  `json:"seconds"`
	Within   bool     `json:"within"`
	Reason   string   `json:"reason"`

	// Own is what the bench loses by itself, already taken off Rate.
	Own *float64 `json:"own_mmHg_s,omitempty"`
	// The same as gas that leaves, at the pressure in the volume.
	Volume       *float64 `json:"volume_mL,omitempty"`
	Flow         *float64 `json:"rate_mL_min,omitempty"`
	FlowExpanded *float64 `json:"rate_mL_min_expanded_uncertainty,omitempty"`
}

// ErrorPoint is one static reading for the error chart, in mmHg, after zeroing.
type ErrorPoint struct {
	Set      float64  `json:"set"`
	Pressure float64  `json:"pressure"`
	Error    float64  `json:"error"`
	Expanded float64  `json:"expanded_uncertainty"`
	Low      *float64 `json:"low"`
	High     *float64 `json:"high"`
	Guard    float64  `json:"guard_band"`
	Cycle    int      `json:"cycle"`
	Leg      string   `json:"leg"`
}

// StepTrace is one step for the chart: samples from Start on, Period apart, in
// the step's pressure unit, rounded to 1e-4 of it. Time zero is the edge.
type StepTrace struct {
	Number   int       `json:"number"`
	Start    float64   `json:"start_s"`
	Period   float64   `json:"period_s"`
	Measured []float64 `json:"measured"`
	Fitted   []float64 `json:"fitted"` // empty when undetermined
}
