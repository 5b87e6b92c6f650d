package checksum

// parameters of one CRC as the trade writes them: polynomial without its top
// bit, start value, whether bits are taken and put out least significant
// first, and what is exclusive-ored onto the result.
type parameters struct {
	name      string
	bits      int
	poly      uint32
	init      uint32
	reflected bool
	xorout    uint32
}

// catalogue is every CRC of 8, 16 and 32 bits of the open catalogue of CRC
// algorithms, under its names there. Source: testdata/sources/crc-catalogue.
func catalogue() []parameters {
	return []parameters{
		{"crc-8/autosar", 8, 0x2f, 0xff, false, 0xff},
		{"crc-8/bluetooth", 8, 0xa7, 0x00, true, 0x00},
		{"crc-8/cdma2000", 8, 0x9b, 0xff, false, 0x00},
		{"crc-8/darc", 8, 0x39, 0x00, true, 0x00},
		{"crc-8/dvb-s2", 8, 0xd5, 0x00, false, 0x00},
		{"crc-8/gsm-a", 8, 0x1d, 0x00, false, 0x00},
		{"crc-8/gsm-b", 8, 0x49, 0x00, false, 0xff},
		{"crc-8/hitag", 8, 0x1d, 0xff, false, 0x00},
		{"crc-8/i-432-1", 8, 0x07, 0x00, false, 0x55},
		{"crc-8/i-code", 8, 0x1d, 0xfd, false, 0x00},
		{"crc-8/lte", 8, 0x9b, 0x00, false, 0x00},
		{"crc-8/maxim-dow", 8, 0x31, 0x00, true, 0x00},
		{"crc-8/mifare-mad", 8, 0x1d, 0xc7, false, 0x00},
		{"crc-8/nrsc-5", 8, 0x31, 0xff, false, 0x00},
		{"crc-8/opensafety", 8, 0x2f, 0x00, false, 0x00},
		{"crc-8/rohc", 8, 0x07, 0xff, true, 0x00},
		{"crc-8/sae-j1850", 8, 0x1d, 0xff, false, 0xff},
		{"crc-8/smbus", 8, 0x07, 0x00, false, 0x00},
		{"crc-8/tech-3250", 8, 0x1d, 0xff, true, 0x00},
		{"crc-8/wcdma", 8, 0x9b, 0x00, true, 0x00},
		{"crc-16/arc", 16, 0x8005, 0x0000, true, 0x0000},
		{"crc-16/cdma2000", 16, 0xc867, 0xffff, false, 0x0000},
		{"crc-16/cms", 16, 0x8005, 0xffff, false, 0x0000},
		{"crc-16/dds-110", 16, 0x8005, 0x800d, false, 0x0000},
		{"crc-16/dect-r", 16, 0x0589, 0x0000, false, 0x0001},
		{"crc-16/dect-x", 16, 0x0589, 0x0000, false, 0x0000},
		{"crc-16/dnp", 16, 0x3d65, 0x0000, true, 0xffff},
		{"crc-16/en-13757", 16, 0x3d65, 0x0000, false, 0xffff},
		{"crc-16/genibus", 16, 0x1021, 0xffff, false, 0xffff},
		{"crc-16/gsm", 16, 0x1021, 0x0000, false, 0xffff},
		{"crc-16/ibm-3740", 16, 0x1021, 0xffff, false, 0x0000},
		{"crc-16/ibm-sdlc", 16, 0x1021, 0xffff, true, 0xffff},
		{"crc-16/iso-iec-14443-3-a", 16, 0x1021, 0xc6c6, true, 0x0000},
		{"crc-16/kermit", 16, 0x1021, 0x0000, true, 0x0000},
		{"crc-16/lj1200", 16, 0x6f63, 0x0000, false, 0x0000},
		{"crc-16/m17", 16, 0x5935, 0xffff, false, 0x0000},
		{"crc-16/maxim-dow", 16, 0x8005, 0x0000, true, 0xffff},
		{"crc-16/mcrf4xx", 16, 0x1021, 0xffff, true, 0x0000},
		{"crc-16/modbus", 16, 0x8005, 0xffff, true, 0x0000},
		{"crc-16/nrsc-5", 16, 0x080b, 0xffff, true, 0x0000},
		{"crc-16/opensafety-a", 16, 0x5935, 0x0000, false, 0x0000},
		{"crc-16/opensafety-b", 16, 0x755b, 0x0000, false, 0x0000},
		{"crc-16/profibus", 16, 0x1dcf, 0xffff, false, 0xffff},
		{"crc-16/riello", 16, 0x1021, 0xb2aa, true, 0x0000},
		{"crc-16/spi-fujitsu", 16, 0x1021, 0x1d0f, false, 0x0000},
		{"crc-16/t10-dif", 16, 0x8bb7, 0x0000, false, 0x0000},
		{"crc-16/teledisk", 16, 0xa097, 0x0000, false, 0x0000},
		{"crc-16/tms37157", 16, 0x1021, 0x89ec, true, 0x0000},
		{"crc-16/umts", 16, 0x8005, 0x0000, false, 0x0000},
		{"crc-16/usb", 16, 0x8005, 0xffff, true, 0xffff},
		{"crc-16/xmodem", 16, 0x1021, 0x0000, false, 0x0000},
		{"crc-32/aixm", 32, 0x814141ab, 0x00000000, false, 0x00000000},
		{"crc-32/autosar", 32, 0xf4acfb13, 0xffffffff, true, 0xffffffff},
		{"crc-32/base91-d", 32, 0xa833982b, 0xffffffff, true, 0xffffffff},
		{"crc-32/bzip2", 32, 0x04c11db7, 0xffffffff, false, 0xffffffff},
		{"crc-32/cd-rom-edc", 32, 0x8001801b, 0x00000000, true, 0x00000000},
		{"crc-32/cksum", 32, 0x04c11db7, 0x00000000, false, 0xffffffff},
		{"crc-32/iscsi", 32, 0x1edc6f41, 0xffffffff, true, 0xffffffff},
		{"crc-32/iso-hdlc", 32, 0x04c11db7, 0xffffffff, true, 0xffffffff},
		{"crc-32/jamcrc", 32, 0x04c11db7, 0xffffffff, true, 0x00000000},
		{"crc-32/mef", 32, 0x741b8cd7, 0xffffffff, true, 0x00000000},
		{"crc-32/mpeg-2", 32, 0x04c11db7, 0xffffffff, false, 0x00000000},
		{"crc-32/xfer", 32, 0x000000af, 0x00000000, false, 0x00000000},
	}
}

// known gives the catalogue's name for other names in use (from memory; the
// catalogue lists them as aliases).
func known(name string) string {
	switch name {
	case "crc-8", "crc8":
		return "crc-8/smbus"
	case "crc-8/maxim":
		return "crc-8/maxim-dow"
	case "crc-16", "crc-16/ibm", "crc-16/lha":
		return "crc-16/arc"
	case "crc-16/ccitt-false", "crc-16/autosar":
		return "crc-16/ibm-3740"
	case "crc-16/ccitt", "crc-16/ccitt-true", "crc-16/v-41-lsb":
		return "crc-16/kermit"
	case "crc-16/x-25", "crc-16/iso-hdlc", "crc-16/iso-iec-14443-3-b":
		return "crc-16/ibm-sdlc"
	case "crc-16/acorn", "crc-16/lte", "crc-16/v-41-msb", "xmodem":
		return "crc-16/xmodem"
	case "crc-16/buypass", "crc-16/verifone":
		return "crc-16/umts"
	case "crc-16/maxim":
		return "crc-16/maxim-dow"
	case "modbus":
		return "crc-16/modbus"
	case "crc-32", "crc-32/adccp", "crc-32/xz", "crc-32/v-42":
		return "crc-32/iso-hdlc"
	case "crc-32c", "crc-32/castagnoli":
		return "crc-32/iscsi"
	case "crc-32/posix":
		return "crc-32/cksum"
	}
	return name
}
