package livelog

import (
	"fmt"
	"net"
	"net/url"
	"strconv"
	"strings"
)

// Source is where lines come from.
type Source struct {
	kind   string // serial, tcp or udp
	target string // a device, or HOST:PORT
	baud   int
}

// The kinds of sources.
const (
	serialPort = "serial"
	tcp        = "tcp"
	udp        = "udp"
)

// DefaultBaud is the rate of NMEA 0183.
const DefaultBaud = 4800

// Is reports whether a text names a source: it begins with serial:, tcp: or
// udp:.
func Is(text string) bool {
	kind, _, ok := strings.Cut(text, ":")
	return ok && (kind == serialPort || kind == tcp || kind == udp)
}

// Parse reads a source: serial:DEVICE, serial:DEVICE?baud=38400,
// tcp:HOST:PORT, which is connected to, or udp:HOST:PORT, which is listened on;
// udp::PORT listens on every address of the machine.
func Parse(text string) (Source, error) {
	kind, target, _ := strings.Cut(text, ":")
	s := Source{kind: kind, target: target, baud: DefaultBaud}
	wrong := func(format string, args ...any) (Source, error) {
		return Source{}, fmt.Errorf("%s: %s", text, fmt.Sprintf(format, args...))
	}
	switch kind {
	case serialPort:
		device, query, asked := strings.Cut(target, "?")
		s.target = device
		if device == "" {
			return wrong("it names no device: give one, such as serial:/dev/ttyUSB0?baud=4800")
		}
		if !asked {
			break
		}
		values, err := url.ParseQuery(query)
		if err != nil {
			return wrong("%v", err)
		}
		for key, v := range values {
			if key != "baud" || len(v) != 1 {
				return wrong("%q is no setting of a serial port: give baud once", key)
			}
			if s.baud, err = strconv.Atoi(v[0]); err != nil || s.baud < 50 || s.baud > 4_000_000 {
				return wrong("%q is no rate: give 50 to 4000000 baud", v[0])
			}
		}
	case tcp, udp:
		host, port, err := net.SplitHostPort(target)
		n, number := strconv.ParseUint(port, 10, 16)
		if err != nil || number != nil || n == 0 && kind == tcp || host == "" && kind == tcp {
			return wrong("it is no address: give tcp:HOST:PORT to connect to, or udp:HOST:PORT, or udp::PORT, to listen on")
		}
	default:
		return wrong("it is no source: give serial:DEVICE, tcp:HOST:PORT or udp:HOST:PORT")
	}
	return s, nil
}

// String returns the source as it is written.
func (s Source) String() string {
	text := s.kind + ":" + s.target
	if s.kind == serialPort && s.baud != DefaultBaud {
		text += "?baud=" + strconv.Itoa(s.baud)
	}
	return text
}
