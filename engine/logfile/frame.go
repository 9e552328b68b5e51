package logfile

import (
	"bytes"
	"fmt"
	"strconv"

	"leadline/engine/sensor"
)

// Bounds of a line. The standard's sentences have 82 characters; instruments
// exceed that, and a time or a tag block may stand before.
const (
	// MaxSentenceLine is the longest line that is looked at.
	MaxSentenceLine = 1024
	maxFields       = 64
)

// sentence is one NMEA 0183 sentence whose checksum is right.
type sentence struct {
	address string // as SDDPT
	fields  []cell // after the address
	before  []byte // what stands before it in the line
}

// kind is the sentence's type, DPT of SDDPT.
func (s *sentence) kind() string { return s.address[2:] }

// refusal says why something cannot be used, and at which byte of its line.
type refusal struct {
	byte           int
	reason, detail string
}

// passed says that something is no fault and has no use.
type passed string

// frame takes a line apart:
//
//	[anything] $ADDRESS,field,field*hh
//
// hh is the exclusive or of what stands between $ and *, in hexadecimal. The
// last $ or ! of a line counts, so that line noise before it, or a sentence
// that was cut off, does no harm.
func frame(line []byte) (s sentence, pass passed, bad *refusal) {
	line = bytes.TrimRight(line, " \t\r\x00")
	if len(line) == 0 {
		return s, "blank line", nil
	}
	start := bytes.LastIndexAny(line, "$!")
	if start < 0 {
		return s, "", &refusal{1, "no sentence", string(line)}
	}
	s.before = line[:start]
	text := line[start+1:]
	star := bytes.LastIndexByte(text, '*')
	if star < 0 {
		return s, "", &refusal{start + 1, noChecksum, string(line[start:])}
	}
	said, err := strconv.ParseUint(string(text[star+1:]), 16, 8)
	if err != nil || len(text)-star != 3 {
		return s, "", &refusal{start + star + 2, noChecksum, string(line[start:])}
	}
	body := text[:star]
	if is := checksum(body); byte(said) != is {
		return s, "", &refusal{start + star + 2, wrongChecksum, fmt.Sprintf("%s: it should be %02X", line[start:], is)}
	}
	for i, c := range body {
		if c < ' ' || c > '~' {
			return s, "", &refusal{start + i + 2, "not text", string(line[start:])}
		}
	}
	for at := start + 1; ; {
		end := at
		for end < start+1+star && line[end] != ',' {
			end++
		}
		if s.address == "" && len(s.fields) == 0 && at == start+1 {
			s.address = string(line[at:end])
		} else if len(s.fields) == maxFields {
			return s, "", &refusal{at + 1, "too many fields", string(line[start:])}
		} else {
			s.fields = append(s.fields, cell{line[at:end], at + 1})
		}
		if end == start+1+star {
			break
		}
		at = end + 1
	}
	switch {
	case line[start] == '!':
		return s, passed("!" + printable(s.address[:min(5, len(s.address))])), nil
	case len(s.address) > 0 && s.address[0] == 'P':
		return s, "proprietary", nil
	case len(s.address) != 5 || !upper(s.address):
		return s, "", &refusal{start + 2, "address", string(line[start:])}
	}
	return s, "", nil
}

func upper(s string) bool {
	for i := 0; i < len(s); i++ {
		if c := s[i]; !(c >= 'A' && c <= 'Z' || c >= '0' && c <= '9') {
			return false
		}
	}
	return true
}

// The reasons of a sentence that has no checksum, or another than it should have.
const (
	noChecksum    = "no checksum"
	wrongChecksum = "checksum"
)

// checksum is the exclusive or of all bytes (NMEA 0183).
func checksum(body []byte) (x byte) {
	for _, c := range body {
		x ^= c
	}
	return x
}

// tagTime finds the time of a tag block before a sentence, \c:…*hh\ (NMEA
// 0183, 4.00): seconds since 1970, or milliseconds where it is that large.
func tagTime(before []byte) (t sensor.Time, there bool, err error) {
	open := bytes.IndexByte(before, '\\')
	end := bytes.LastIndexByte(before, '\\')
	if open == end {
		return 0, false, nil
	}
	block := before[open+1 : end]
	star := bytes.LastIndexByte(block, '*')
	if star < 0 {
		return 0, false, fmt.Errorf("the tag block has no checksum")
	}
	said, err := strconv.ParseUint(string(block[star+1:]), 16, 8)
	if err != nil || byte(said) != checksum(block[:star]) {
		return 0, false, fmt.Errorf("the tag block's checksum is wrong")
	}
	for part := range bytes.SplitSeq(block[:star], []byte(",")) {
		digits, ok := bytes.CutPrefix(part, []byte("c:"))
		if !ok {
			continue
		}
		unit := int64(1e9)
		if len(digits) > 11 && bytes.IndexByte(digits, '.') < 0 {
			unit = 1e6
		}
		t, err := parseCount(string(digits), unit, 0)
		return t, true, err
	}
	return 0, false, nil
}
