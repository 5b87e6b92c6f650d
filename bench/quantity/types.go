package quantity

import "time"

// The quantities that cross from one package to another, each in its SI unit.
type (
	Pressure     float64 // Pa
	Voltage      float64 // V
	Ratio        float64 // V/V: a bridge's output per excitation
	Sensitivity  float64 // V/V/Pa
	Frequency    float64 // Hz
	Temperature  float64 // K
	Length       float64 // m
	Span         float64 // s
	PressureRate float64 // Pa/s
)

// MillimetreOfMercury is the conventional millimetre of mercury, exact.
const MillimetreOfMercury Pressure = mmHgPa

// MmHg makes a pressure of x mmHg.
func MmHg(x float64) Pressure { return Pressure(x * mmHgPa) }

// MmHg returns the pressure in mmHg.
func (p Pressure) MmHg() float64 { return float64(p) / mmHgPa }

// MmHgPerSecond returns the rate in mmHg/s.
func (r PressureRate) MmHgPerSecond() float64 { return float64(r) / mmHgPa }

// MicrovoltPerVoltPerMmHg returns the sensitivity in uV/V/mmHg.
func (s Sensitivity) MicrovoltPerVoltPerMmHg() float64 { return float64(s) * mmHgPa * 1e6 }

// Duration returns the span to the nearest nanosecond.
func (s Span) Duration() time.Duration {
	if s < 0 {
		return time.Duration(float64(s)*1e9 - 0.5)
	}
	return time.Duration(float64(s)*1e9 + 0.5)
}

// ParsePressure reads "300 mmHg"; the others likewise for their quantity.
func ParsePressure(s string) (Pressure, error) { return parse[Pressure](s, DimPressure) }

// ParseVoltage reads "5 V".
func ParseVoltage(s string) (Voltage, error) { return parse[Voltage](s, DimVoltage) }

// ParseRatio reads "1500 uV/V".
func ParseRatio(s string) (Ratio, error) { return parse[Ratio](s, DimRatio) }

// ParseSensitivity reads "5 uV/V/mmHg".
func ParseSensitivity(s string) (Sensitivity, error) { return parse[Sensitivity](s, DimSensitivity) }

// ParseFrequency reads "24 Hz".
func ParseFrequency(s string) (Frequency, error) { return parse[Frequency](s, DimFrequency) }

// ParseTemperature reads "21.5 degC".
func ParseTemperature(s string) (Temperature, error) { return parse[Temperature](s, DimTemperature) }

// ParseLength reads "1 mm".
func ParseLength(s string) (Length, error) { return parse[Length](s, DimLength) }

// ParseSpan reads "1 ms".
func ParseSpan(s string) (Span, error) { return parse[Span](s, DimSpan) }

// ParsePressureRate reads "0.1 mmHg/s".
func ParsePressureRate(s string) (PressureRate, error) {
	return parse[PressureRate](s, DimPressureRate)
}

func parse[Q ~float64](s string, d Dimension) (Q, error) {
	v, err := ParseAs(s, d)
	return Q(v.SI), err
}
