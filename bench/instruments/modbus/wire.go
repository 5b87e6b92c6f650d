package modbus

import (
	"encoding/binary"
	"fmt"
	"time"

	"kymobench/bench/checksum"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
)

// The functions spoken. Source: Modbus application protocol V1.1b3, 6.3, 6.4,
// 6.6, 6.12 and 7; framing and CRC: Modbus over serial line V1.02, 2.5.1; both
// from memory.
const (
	readHolding   = 3
	readInput     = 4
	writeSingle   = 6
	writeMultiple = 16
	exception     = 0x80
)

// whole tells how long the answer is that data begins with. What is no answer
// to anything asked here counts as one frame, to be refused at once.
func whole(data []byte) int {
	if len(data) < 3 {
		return 0
	}
	switch function := data[1]; {
	case function == readHolding || function == readInput:
		return 5 + int(data[2])
	case function == writeSingle || function == writeMultiple:
		return 8
	case function&exception != 0:
		return 5
	}
	return len(data)
}

// Settings of the line that an instrument speaks on: no text, parted by a
// silence of three and a half characters of eleven bits, at most 1.75 ms above
// 19200 baud.
func LineSettings(name string, baud int) line.Settings {
	silence := 1750 * time.Microsecond
	if baud > 0 && baud <= 19200 {
		silence = time.Duration(3.5 * 11 / float64(baud) * 1e9)
	}
	return line.Settings{Name: name, Whole: whole, Silence: silence}
}

// wire makes messages to one station and reads its answers.
type wire struct {
	name    string
	station byte
	crc     *checksum.Algorithm
}

func newWire(name string, station int) (wire, error) {
	if station < 1 || station > 247 {
		return wire{}, fmt.Errorf("%s: a station has a number from 1 to 247", name)
	}
	crc, ok := checksum.Named("crc-16/modbus")
	if !ok {
		return wire{}, fmt.Errorf("%s: no CRC", name)
	}
	return wire{name, byte(station), crc}, nil
}

// message is what is sent: station, function, data and CRC.
func (w wire) message(function byte, data ...byte) string {
	m := append([]byte{w.station, function}, data...)
	return string(binary.LittleEndian.AppendUint16(m, uint16(w.crc.Of(m))))
}

func (w wire) question(q Question) string {
	n := q.registers()
	return w.message(q.function(), byte(q.At>>8), byte(q.At), byte(n>>8), byte(n))
}

// command is the message that writes data into registers.
func (w wire) command(c Command, data []byte) string {
	head := []byte{byte(c.At >> 8), byte(c.At)}
	if !c.Many {
		return w.message(writeSingle, append(head, data...)...)
	}
	n := len(data) / 2
	head = append(head, byte(n>>8), byte(n), byte(len(data)))
	return w.message(writeMultiple, append(head, data...)...)
}

// answered looks at what all answers have in common.
func (w wire) answered(question, answer string) error {
	switch n := len(answer); {
	case n < 5:
		return fmt.Errorf("% X is no answer", answer)
	case w.crc.OfText(answer[:n-2]) != uint32(answer[n-2])|uint32(answer[n-1])<<8:
		return fmt.Errorf("% X: its CRC does not belong to it", answer)
	case answer[0] != w.station:
		return fmt.Errorf("% X comes from station %d, %d was asked", answer, answer[0], w.station)
	case answer[1] == question[1]|exception && n == 5:
		return &asked.RefusedError{Name: w.name, Question: fmt.Sprintf("% X", question), Why: inWords(answer[2])}
	case answer[1] != question[1]:
		return fmt.Errorf("% X answers function %d, %d was asked", answer, answer[1], question[1])
	}
	return nil
}

// registersOf returns the bytes of the registers in an answer to a question.
func (w wire) registersOf(question, answer string, n int) (string, error) {
	if err := w.answered(question, answer); err != nil {
		return "", err
	}
	if int(answer[2]) != 2*n || len(answer) != 5+2*n {
		return "", fmt.Errorf("% X holds %d bytes, %d were asked for", answer, answer[2], 2*n)
	}
	return answer[3 : 3+2*n], nil
}

// written looks whether an answer says that a command was carried out: it
// gives back the register, and what or how much was written.
func (w wire) written(command, answer string) error {
	if err := w.answered(command, answer); err != nil {
		return err
	}
	if len(answer) != 8 || answer[2:6] != command[2:6] {
		return fmt.Errorf("% X does not confirm % X", answer, command)
	}
	return nil
}

// inWords says what an exception means. Source: Modbus application protocol
// V1.1b3, 7, from memory, in words of our own.
func inWords(code byte) string {
	words := map[byte]string{
		1: "it does not know this function", 2: "it has no such register", 3: "it does not take that value or number of registers",
		4: "it could not carry it out", 5: "it has taken it and needs more time", 6: "it is busy", 8: "its memory is faulty",
		10: "the gateway has no way to it", 11: "the gateway heard nothing from it",
	}
	if s, ok := words[code]; ok {
		return fmt.Sprintf("%s (exception %d)", s, code)
	}
	return fmt.Sprintf("exception %d", code)
}
