package client

import (
	"errors"
	"io"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
)

// TestLeave proves that leaving sends everything, waits for the server to have
// taken it, and does not end the drive; and that a failure is told.
func TestLeave(t *testing.T) {
	var got int
	for name, end := range map[string]error{"": nil, "draining": status.Error(codes.Unavailable, "draining")} {
		got = 0
		conn := against(t, func(st serverStream) error {
			if _, err := st.Recv(); err != nil {
				return err
			}
			if err := st.Send(opened(0, 10, 1000)); err != nil {
				return err
			}
			for {
				m, err := st.Recv()
				switch {
				case errors.Is(err, io.EOF):
					return end
				case err != nil:
					return err
				case m.GetEnd() != nil:
					return errors.New("the drive was ended")
				}
				got += len(m.GetBatch().GetMeasurements())
				if err := st.Send(receipt(m.GetBatch().GetSequence())); err != nil {
					return err
				}
			}
		})
		f, err := Open(limited(t), conn, Drive{})
		if err != nil {
			t.Fatal(err)
		}
		for i := range 25 {
			if err := f.Send(measurement(i)); err != nil {
				t.Fatal(err)
			}
		}
		err = f.Leave()
		if (err != nil) != (end != nil) || err != nil && !strings.Contains(err.Error(), name) {
			t.Errorf("%q: %v", name, err)
		}
		if got != 25 {
			t.Errorf("%q: the server has %d of 25", name, got)
		}
	}
}

// TestLeaveTooLate proves that leaving a stream that the server has ended is an
// error.
func TestLeaveTooLate(t *testing.T) {
	conn := against(t, func(st serverStream) error {
		if _, err := st.Recv(); err != nil {
			return err
		}
		return st.Send(opened(0, 10, 1000))
	})
	f, err := Open(limited(t), conn, Drive{})
	if err != nil {
		t.Fatal(err)
	}
	<-f.done
	if err := f.Leave(); err == nil {
		t.Error("no error")
	}
}
