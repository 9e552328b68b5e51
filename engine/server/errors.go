package server

import (
	"errors"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/protoadapt"
	"google.golang.org/protobuf/types/known/durationpb"

	"leadline/engine/session"
	leadlinev1 "leadline/proto/leadline/v1"
)

// domain is that of the reasons in the server's errors.
const domain = "leadline.v1"

// reasonCodes are the codes of the reasons why calls fail, as reason.proto has
// them.
var reasonCodes = map[leadlinev1.Reason]codes.Code{
	leadlinev1.Reason_REASON_BAD_FIELD:       codes.InvalidArgument,
	leadlinev1.Reason_REASON_WRONG_MESSAGE:   codes.InvalidArgument,
	leadlinev1.Reason_REASON_UNKNOWN_MAP:     codes.NotFound,
	leadlinev1.Reason_REASON_UNKNOWN_SUITE:   codes.NotFound,
	leadlinev1.Reason_REASON_UNKNOWN_VEHICLE: codes.NotFound,
	leadlinev1.Reason_REASON_BAD_START:       codes.InvalidArgument,
	leadlinev1.Reason_REASON_OTHER_HEADER:    codes.FailedPrecondition,
	leadlinev1.Reason_REASON_OTHER_DRIVE:     codes.AlreadyExists,
	leadlinev1.Reason_REASON_OUT_OF_ORDER:    codes.FailedPrecondition,
	leadlinev1.Reason_REASON_DRIVE_ENDED:     codes.FailedPrecondition,
	leadlinev1.Reason_REASON_NO_POSTERIOR:    codes.FailedPrecondition,
	leadlinev1.Reason_REASON_SERVER_FULL:     codes.ResourceExhausted,
	leadlinev1.Reason_REASON_SILENT:          codes.DeadlineExceeded,
	leadlinev1.Reason_REASON_TAKEN_OVER:      codes.Aborted,
	leadlinev1.Reason_REASON_REPLACED:        codes.Aborted,
	leadlinev1.Reason_REASON_STOPPING:        codes.Unavailable,
	leadlinev1.Reason_REASON_SESSION_FAILED:  codes.Internal,
	leadlinev1.Reason_REASON_NOT_OFFERED:     codes.Unimplemented,
	leadlinev1.Reason_REASON_BAD_TOKEN:       codes.InvalidArgument,
	leadlinev1.Reason_REASON_BAD_MAP:         codes.InvalidArgument,
	leadlinev1.Reason_REASON_MAP_EXISTS:      codes.AlreadyExists,
	leadlinev1.Reason_REASON_UNKNOWN_ALARM:   codes.NotFound,
	leadlinev1.Reason_REASON_UNKNOWN_DRIVE:   codes.NotFound,

	leadlinev1.Reason_REASON_NO_IDENTITY:        codes.Unauthenticated,
	leadlinev1.Reason_REASON_BAD_IDENTITY:       codes.Unauthenticated,
	leadlinev1.Reason_REASON_IDENTITY_EXPIRED:   codes.Unauthenticated,
	leadlinev1.Reason_REASON_IDENTITY_UNCHECKED: codes.Unavailable,
	leadlinev1.Reason_REASON_NOT_ALLOWED:        codes.PermissionDenied,
	leadlinev1.Reason_REASON_TOO_FAST:           codes.ResourceExhausted,
	leadlinev1.Reason_REASON_ERASED:             codes.Aborted,
	leadlinev1.Reason_REASON_JOURNAL_FULL:       codes.ResourceExhausted,
	leadlinev1.Reason_REASON_JOURNAL_DOWN:       codes.Unavailable,
	leadlinev1.Reason_REASON_JOURNAL_DAMAGED:    codes.DataLoss,
	leadlinev1.Reason_REASON_RECOVERING:         codes.Unavailable,
	leadlinev1.Reason_REASON_UNKNOWN_RESULT:     codes.NotFound,
	leadlinev1.Reason_REASON_BAD_RESULT:         codes.DataLoss,
}

// retryAfter is after how long a call may do that was refused for what passes: a
// hint that goes with the refusal, in a google.rpc.RetryInfo.
var retryAfter = map[leadlinev1.Reason]time.Duration{
	leadlinev1.Reason_REASON_SERVER_FULL:        5 * time.Second,
	leadlinev1.Reason_REASON_JOURNAL_FULL:       5 * time.Second,
	leadlinev1.Reason_REASON_JOURNAL_DOWN:       time.Second,
	leadlinev1.Reason_REASON_STOPPING:           time.Second,
	leadlinev1.Reason_REASON_IDENTITY_UNCHECKED: 5 * time.Second,
	leadlinev1.Reason_REASON_RECOVERING:         200 * time.Millisecond,
}

// about says what a failure is about, for programs: vehicle, drive, map, suite, result,
// field (of the request), method, limit (its name) and most (its value).
type about map[string]string

// refuse makes the error of a call. Every error that the server itself answers
// with comes from here; only those of gRPC do not (a message that is too large
// or no message, a call that the client gave up).
func refuse(reason leadlinev1.Reason, on about, format string, args ...any) error {
	return refuseFor(reason, retryAfter[reason], on, format, args...)
}

// refuseFor is refuse for what may do after a while; 0 is that trying again does
// not help.
func refuseFor(reason leadlinev1.Reason, wait time.Duration, on about, format string, args ...any) error {
	code, ok := reasonCodes[reason]
	if !ok {
		panic(fmt.Sprintf("server: %v is no reason of a call", reason))
	}
	info := &errdetails.ErrorInfo{
		Reason: strings.TrimPrefix(reason.String(), "REASON_"), Domain: domain, Metadata: map[string]string{},
	}
	for k, v := range on {
		info.Metadata[k] = clip(v)
	}
	details := []protoadapt.MessageV1{info}
	if wait > 0 {
		details = append(details, &errdetails.RetryInfo{RetryDelay: durationpb.New(wait)})
	}
	st, err := status.New(code, clip(fmt.Sprintf(format, args...))).WithDetails(details...)
	if err != nil {
		panic("server: " + err.Error()) // the code is none of success
	}
	return st.Err()
}

// badField is the refusal of a field of a request, by its path.
func badField(path, format string, args ...any) error {
	return refuse(leadlinev1.Reason_REASON_BAD_FIELD, about{"field": path}, format, args...)
}

// full is the refusal of what would exceed a limit of the server.
func full(limit string, most int, format string, args ...any) error {
	return refuse(leadlinev1.Reason_REASON_SERVER_FULL, ofLimit(about{}, limit, most), format, args...)
}

// ofLimit adds to what a failure is about which limit is in the way.
func ofLimit(on about, limit string, most int) about {
	on["limit"], on["most"] = limit, strconv.Itoa(most)
	return on
}

// failure words an error of refuse for a part of an answer.
func failure(err error) *leadlinev1.Failure {
	st := status.Convert(err)
	f := &leadlinev1.Failure{Message: st.Message()}
	for _, d := range st.Details() {
		if info, ok := d.(*errdetails.ErrorInfo); ok {
			f.Reason = leadlinev1.Reason(leadlinev1.Reason_value["REASON_"+info.GetReason()])
		}
	}
	return f
}

// errStopping answers whoever is there when the server stops.
var errStopping = refuse(leadlinev1.Reason_REASON_STOPPING, nil, "the server stops: open the drive again later; what was not acknowledged must be sent again")

// measurementReasons are the API's words for a session's.
var measurementReasons = map[session.Reason]leadlinev1.Reason{
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
	r.Reason, r.Detail = measurementReasons[ref.Reason], clip(ref.Detail)
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
