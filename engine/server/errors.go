package server

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"leadline/engine/session"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Errors that more than one place answers with.
var (
	errDraining  = status.Error(codes.Unavailable, "the server stops: open the drive again later; what was not acknowledged must be sent again")
	errTakenOver = status.Error(codes.Aborted, "another stream has opened this drive: only one may feed it")
	errReplaced  = status.Error(codes.Aborted, "the vehicle has opened another drive in place of this one")
)

// reasons are the API's words for a session's.
var reasons = map[session.Reason]leadlinev1.Reason{
	session.Unusable:    leadlinev1.Reason_REASON_UNUSABLE,
	session.WrongSpace:  leadlinev1.Reason_REASON_WRONG_SPACE,
	session.TooLate:     leadlinev1.Reason_REASON_TOO_LATE,
	session.TooEarly:    leadlinev1.Reason_REASON_TOO_EARLY,
	session.Conflicting: leadlinev1.Reason_REASON_CONFLICTING,
	session.Overfull:    leadlinev1.Reason_REASON_TOO_MUCH,
}

// refusal says why a measurement was not used; ok is false if the error is not
// about the measurement.
func refusal(i int, m *leadlinev1.SensorMeasurement, err error) (*leadlinev1.Refusal, bool) {
	r := &leadlinev1.Refusal{
		Index: uint32(i), Time: m.GetTime(), Sensor: clip(m.GetSensor()), Number: m.GetNumber(),
	}
	var ref *session.Refusal
	if !errors.As(err, &ref) {
		return nil, false
	}
	r.Reason, r.Detail = reasons[ref.Reason], clip(ref.Detail)
	return r, true
}

// clip bounds a client's words that go back to it.
func clip(s string) string {
	const most = 1024
	if len(s) <= most {
		return s
	}
	return strings.ToValidUTF8(s[:most], "") + "…"
}

// known lists up to ten names for an error.
func known(names []string) string {
	slices.Sort(names)
	const most = 10
	more := ""
	if len(names) > most {
		more = fmt.Sprintf(" and %d more", len(names)-most)
		names = names[:most]
	}
	if len(names) == 0 {
		return "none"
	}
	quoted := make([]string, len(names))
	for i, n := range names {
		quoted[i] = fmt.Sprintf("%q", n)
	}
	return strings.Join(quoted, ", ") + more
}
