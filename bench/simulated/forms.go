package simulated

import "fmt"

// referenceKeys are the keys of the reference's form in a bench file.
func (b *Bench) referenceKeys() string {
	switch b.settings.Families.Reference {
	case "lines":
		return fmt.Sprintf(`family = "lines"
mode = "asked"
baud = 19200
terminator = "cr"
echo = true
identify = "ID?"
identity = %s
uptime = "ON?"
read = "P?"
zero = "Z"
acknowledged = "DONE"
begins = "#"
separator = ";"
columns = 4
column = 1
decimal = "comma"
unit = "mmHg"
unit_column = 2
status_column = 3
status_fine = ["0"]
status_over = ["1"]
checksum = "crc-16/modbus"
checksum_mark = ";"
length = 23
`, quoted(identityReference))
	case "running":
		return `family = "lines"
mode = "free-running"
baud = 19200
unit = "mmHg"
unit_in_text = true
zero = "Z"
`
	case "modbus":
		return fmt.Sprintf(`family = "modbus"
baud = 19200
parity = "even"
station = 11
word_order = "low-first"
identify = "holding 100 text16"
identity = %s
uptime = "holding 90 uint32"
read = "input 0 float32"
zero = "holding 16 uint16 = 1"
unit = "mmHg"
`, quoted(identityGaugeStation))
	case "frames":
		return `family = "frames"
baud = 38400
length = 8
sync = "52 46"
number = "float32 at 2"
checksum = "crc-16/xmodem"
unit = "kPa"
zero = "Z"
`
	}
	return fmt.Sprintf(`family = "scpi"
baud = 9600
identify = "*IDN?"
identity = %s
uptime = "SYST:UPT?"
clear = "*CLS"
errors = "SYST:ERR?"
read = "MEAS:PRES?"
unit = "mmHg"
zero = "CAL:ZERO"
`, quoted(identityReference))
}

// uutKeys are those of the UUT's form.
func (b *Bench) uutKeys() string {
	switch b.settings.Families.UUT {
	case "checked":
		return fmt.Sprintf(`family = "lines"
mode = "free-running"
baud = 230400
begins = "$"
separator = ","
column = 0
width = %d
status_column = 1
status_fine = ["0"]
status_over = ["1"]
checksum = "xor8"
checksum_mark = "*"
`, lineLength-2)
	case "frames":
		return fmt.Sprintf(`family = "frames"
baud = 230400
length = 11
sync = "A5 5A"
sequence = "uint8 at 2"
number = "int24 at 3"
scale = %g
checksum = "crc-16/ibm-3740"
`, converterResolution)
	}
	return fmt.Sprintf(`family = "lines"
mode = "free-running"
baud = 230400
width = %d
`, lineLength-2)
}

// appliedTable describes the applied pressure, where the form carries it.
func (b *Bench) appliedTable() string {
	if b.settings.Families.UUT != "frames" {
		return ""
	}
	return fmt.Sprintf(`
[applied]
unit = "mmHg"
resolution = "%[1]g mmHg"
number = "int24 little-endian at 6"
scale = %[1]g
`, appliedResolution)
}

// sourceKeys are those of the source's form.
func (b *Bench) sourceKeys() string {
	switch b.settings.Families.Source {
	case "lines":
		return fmt.Sprintf(`family = "lines"
baud = 9600
terminator = "crlf"
identify = "ID"
identity = %s
acknowledged = "OK"
set = "P {kPa}"
hold = "HOLD"
vent = "VENT"
`, quoted(identitySource))
	case "modbus":
		return fmt.Sprintf(`family = "modbus"
baud = 19200
parity = "even"
station = 12
identify = "holding 100 text13"
identity = %s
set = "holding 10 float32 = {mmHg}"
hold = "holding 12 uint16 = 1"
vent = "holding 12 uint16 = 2"
`, quoted(identitySourceStation))
	}
	return fmt.Sprintf(`family = "scpi"
baud = 9600
identify = "*IDN?"
identity = %s
uptime = "SYST:UPT?"
clear = "*CLS"
errors = "SYST:ERR?"
set = "SOUR:PRES {mmHg}"
hold = "SOUR:HOLD"
vent = "SOUR:VENT"
`, quoted(identitySource))
}

// valveKeys are those of the valve's form.
func (b *Bench) valveKeys() string {
	switch b.settings.Families.Valve {
	case "lines":
		return fmt.Sprintf(`family = "lines"
baud = 9600
identify = "I"
identity = %s
acknowledged = "*"
release = "O"
shut = "C"
`, quoted(identityValve))
	case "modbus":
		return `family = "modbus"
baud = 19200
parity = "even"
station = 13
release = "holding 5 uint16 = 1 by 16"
shut = "holding 5 uint16 = 0"
`
	case "modem-line":
		return `family = "modem-line"
release = "dtr on"
shut = "dtr off"
`
	}
	return fmt.Sprintf(`family = "scpi"
baud = 9600
identify = "*IDN?"
identity = %s
clear = "*CLS"
errors = "SYST:ERR?"
release = "ROUT:OPEN"
shut = "ROUT:CLOS"
`, quoted(identityValve))
}
