package tubing

// Interval is the 95 % interval of a figure.
type Interval struct{ Low, High float64 }

// Finding is what fn x zeta says of the damping of a line.
type Finding uint8

// The findings. The zero value is that the data cannot tell.
const (
	Undetermined Finding = iota
	AsStated             // what the stated bore gives
	More                 // more than it can give: narrower somewhere, or another loss
	Less                 // less than it can give: something stated is not so
)

// String is the word for a finding in records.
func (f Finding) String() string {
	switch f {
	case AsStated:
		return "as_stated"
	case More:
		return "more"
	case Less:
		return "less"
	}
	return "undetermined"
}

// How far a clean line may lie from the models: below steady flow because of
// the heavier core of a parabolic profile (Oscillating), above oscillating flow
// because measured damping was found well above the laminar model (Donovan et
// al., J Biomech Eng 1991;113:476-484; the factor of 2 is our own choice).
const (
	least = 0.75
	most  = 2
)

// Judge holds fn x zeta as measured against the stated line. steady and
// oscillating are the intervals of what was measured over Product and over
// Oscillating, with the uncertainty of bore and liquid in them.
//
// More: above twice the larger of the two models in the whole of both
// intervals. Less: below three quarters of the smaller. AsStated: all of it
// between. Undetermined: anything else.
func Judge(steady, oscillating Interval) Finding {
	// The larger model has the smaller ratio.
	smaller, larger := steady, oscillating
	if oscillating.Low < steady.Low {
		smaller, larger = oscillating, steady
	}
	switch {
	case !(smaller.Low <= smaller.High) || !(larger.Low <= larger.High):
		return Undetermined
	case smaller.Low > most:
		return More
	case larger.High < least:
		return Less
	case smaller.High <= most && larger.Low >= least:
		return AsStated
	}
	return Undetermined
}

// JudgeChange holds a figure over that of the same line when it was clean (or
// as it was designed): More when all of its interval is above 1, Less when all
// is below, AsStated when it holds 1 and reaches at most a share width from it.
// Undetermined when it is wider.
func JudgeChange(ratio Interval, width float64) Finding {
	switch {
	case ratio.Low > 1:
		return More
	case ratio.High < 1:
		return Less
	case ratio.Low >= 1-width && ratio.High <= 1+width:
		return AsStated
	}
	return Undetermined
}
