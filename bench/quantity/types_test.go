package quantity

import (
	"math"
	"testing"
	"time"
)

func TestTypes(t *testing.T) {
	p, err := ParsePressure("40 kPa")
	if err != nil || math.Abs(p.MmHg()-300.0246303) > 1e-6 { // 40000/133.322387415
		t.Errorf("40 kPa is %v mmHg, %v", p.MmHg(), err)
	}
	s, err := ParseSensitivity("5 µV/V/mmHg")
	if err != nil || math.Abs(s.MicrovoltPerVoltPerMmHg()-5) > 1e-12 {
		t.Errorf("sensitivity %v, %v", s.MicrovoltPerVoltPerMmHg(), err)
	}
	d, err := ParseSpan("1 ms")
	if err != nil || d.Duration() != time.Millisecond {
		t.Errorf("1 ms is %v, %v", d.Duration(), err)
	}
	if _, err := ParsePressure("5 V"); err == nil {
		t.Error("a voltage was taken for a pressure")
	}
}
