package client

import (
	"errors"
	"fmt"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/types/known/durationpb"
	"google.golang.org/protobuf/types/known/timestamppb"

	leadlinev1 "leadline/proto/leadline/v1"
)

// explained is an error as a server makes it.
func explained(domain, reason string) error {
	st, err := status.New(codes.NotFound, "there is no such map").WithDetails(&errdetails.ErrorInfo{
		Domain: domain, Reason: reason, Metadata: map[string]string{"map": "moon"},
	})
	if err != nil {
		panic(err)
	}
	return st.Err()
}

// TestWhy proves that a reason comes through a connection, and that errors of
// others have none.
func TestWhy(t *testing.T) {
	conn := against(t, func(serverStream) error { return explained("leadline.v1", "UNKNOWN_MAP") })
	_, err := Open(limited(t), conn, Drive{})
	for _, e := range []error{err, fmt.Errorf("the drive: %w", err)} {
		why, ok := WhyOf(e)
		if !ok || why.Message != "there is no such map" || why.Reason != leadlinev1.Reason_REASON_UNKNOWN_MAP || why.About["map"] != "moon" {
			t.Errorf("%v: %+v, %v", e, why, ok)
		}
	}
	if why, ok := WhyOf(explained("leadline.v1", "OF_NEXT_YEAR")); !ok || why.Reason != leadlinev1.Reason_REASON_UNSPECIFIED {
		t.Errorf("a reason of a newer server: %+v, %v", why, ok)
	}
	for _, e := range []error{nil, errors.New("no call"), status.Error(codes.Unavailable, "nobody"), explained("another.service", "UNKNOWN_MAP")} {
		if why, ok := WhyOf(e); ok {
			t.Errorf("%v: %+v", e, why)
		}
	}
}

// TestRetryAfter proves that a server's word when to come back is read and
// heeded: a drive that is refused with it opens again, and not before.
func TestRetryAfter(t *testing.T) {
	const hint = 700 * time.Millisecond // above the first waits of a carrier
	st, err := status.New(codes.ResourceExhausted, "full").WithDetails(&errdetails.RetryInfo{RetryDelay: durationpb.New(hint)})
	if err != nil {
		t.Fatal(err)
	}
	if got := RetryAfter(fmt.Errorf("the drive: %w", st.Err())); got != hint {
		t.Errorf("the hint is read as %v", got)
	}
	for _, e := range []error{nil, errors.New("no call"), status.Error(codes.Unavailable, "nobody")} {
		if got := RetryAfter(e); got != 0 {
			t.Errorf("%v: %v", e, got)
		}
	}
	var came []time.Time
	conn := against(t, func(s serverStream) error {
		if came = append(came, time.Now()); len(came) == 1 {
			return st.Err()
		}
		if err := s.Send(opened(0, 10, 1000)); err != nil {
			return err
		}
		_, err := s.Recv()
		return err
	})
	c, err := Carry(limited(t), conn, Drive{})
	if err != nil {
		t.Fatal(err)
	}
	c.Abort()
	if len(came) != 2 || came[1].Sub(came[0]) < hint {
		t.Errorf("the drive is opened at %v", came)
	}
}

// TestWithdrawn proves that what is withdrawn arrives, in its place among the
// posteriors.
func TestWithdrawn(t *testing.T) {
	conn := against(t, func(st serverStream) error {
		gone := &leadlinev1.Withdrawn{Times: []*timestamppb.Timestamp{{Seconds: 1}}}
		for _, m := range []*leadlinev1.FeedResponse{
			opened(0, 10, 1000),
			{Message: &leadlinev1.FeedResponse_Posterior{Posterior: &leadlinev1.Posterior{Time: &timestamppb.Timestamp{Seconds: 1}}}},
			{Message: &leadlinev1.FeedResponse_Withdrawn{Withdrawn: gone}},
			{Message: &leadlinev1.FeedResponse_Posterior{Posterior: &leadlinev1.Posterior{Time: &timestamppb.Timestamp{Seconds: 2}}}},
		} {
			if err := st.Send(m); err != nil {
				return err
			}
		}
		for {
			m, err := st.Recv()
			if err != nil {
				return err
			}
			if m.GetEnd() != nil {
				return st.Send(closing)
			}
		}
	})
	said := ""
	f, err := Open(limited(t), conn, Drive{
		OnPosterior: func(p *leadlinev1.Posterior) { said += fmt.Sprint("+", p.GetTime().GetSeconds()) },
		OnWithdrawn: func(w *leadlinev1.Withdrawn) { said += fmt.Sprint("-", w.GetTimes()[0].GetSeconds()) },
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	if said != "+1-1+2" {
		t.Errorf("heard %s", said)
	}
}
