package client

import (
	"errors"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// domain is that of a server's reasons.
const domain = "leadline.v1"

// Why is why a call failed, in the server's words.
type Why struct {
	Reason  leadlinev1.Reason
	Message string // what was wrong, where, and what to do: one line
	// About says which one it was, by vehicle, drive, map, suite, field, method,
	// limit and most (the limit's value), as far as they apply; server is "cut off"
	// where another server should be called.
	About map[string]string
}

// WhyOf returns why a server failed the call that an error came from. It is
// false for an error that is none of a Leadline server: nobody answers, or the
// message is no message for gRPC itself.
func WhyOf(err error) (Why, bool) {
	var of interface{ GRPCStatus() *status.Status }
	if !errors.As(err, &of) {
		return Why{}, false
	}
	st := of.GRPCStatus()
	for _, d := range st.Details() {
		info, ok := d.(*errdetails.ErrorInfo)
		if !ok || info.GetDomain() != domain {
			continue
		}
		// A reason of a newer server is unspecified here.
		return Why{leadlinev1.Reason(leadlinev1.Reason_value["REASON_"+info.GetReason()]), st.Message(), info.GetMetadata()}, true
	}
	return Why{}, false
}

// RetryAfter returns after how long a call may do that a server has refused for
// what passes; 0 where it does not say.
func RetryAfter(err error) time.Duration {
	var of interface{ GRPCStatus() *status.Status }
	if !errors.As(err, &of) {
		return 0
	}
	for _, d := range of.GRPCStatus().Details() {
		if info, ok := d.(*errdetails.RetryInfo); ok {
			return max(info.GetRetryDelay().AsDuration(), 0)
		}
	}
	return 0
}
