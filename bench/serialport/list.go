package serialport

// Found is a port that the system lists. Nothing was opened to find it.
type Found struct {
	Name         string // to open it by
	Stable       string // a name that stays with the adapter, "" when the system keeps none
	USB          bool
	Vendor       string // of a USB adapter: four hexadecimal digits
	Product      string
	SerialNumber string // of the adapter, "" when it has none
	Description  string // as the adapter tells it
}

// Identity is what tells an adapter from others, "" when nothing does.
func (f Found) Identity() string {
	if !f.USB || f.SerialNumber == "" {
		return ""
	}
	return f.Vendor + ":" + f.Product + ":" + f.SerialNumber
}
