package quantity

import "strings"

// spelt returns the known unit that an unknown name was probably meant for:
// one that differs in capitals, blanks and underscores alone, or else in one
// letter of three or more (one changed, lost, added, or two exchanged). ""
// when there is none. It only proposes: "MV" is no mV until a person says so.
func spelt(name string, wanted func(Dimension) bool) string {
	name = folded(name)
	near := ""
	for _, u := range units {
		if !wanted(u.Dimension) {
			continue
		}
		switch like := folded(u.Name); {
		case like == name:
			return u.Name
		case near == "" && len(like) > 2 && len(name) > 1 && oneOff(like, name):
			near = u.Name
		}
	}
	return near
}

func folded(name string) string {
	return strings.NewReplacer(" ", "", "_", "", "°", "deg").Replace(strings.ToLower(plain(name)))
}

// oneOff says that a and b, which differ, are one letter apart.
func oneOff(a, b string) bool {
	if len(a) < len(b) {
		a, b = b, a
	}
	i := 0
	for i < len(b) && a[i] == b[i] {
		i++
	}
	switch len(a) - len(b) {
	case 0:
		exchanged := i+1 < len(a) && a[i] == b[i+1] && a[i+1] == b[i] && a[i+2:] == b[i+2:]
		return exchanged || a[i+1:] == b[i+1:]
	case 1:
		return a[i+1:] == b[i:]
	}
	return false
}
