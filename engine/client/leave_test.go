package client

import (
	"errors"
	"io"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
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

// TestContinue proves that a drive that goes on counts its batches from where
// the server is, and sends each of them.
func TestContinue(t *testing.T) {
	conn := against(t, func(st serverStream) error {
		if _, err := st.Recv(); err != nil {
			return err
		}
		if err := st.Send(opened(7, 10, 1000)); err != nil {
			return err
		}
		m, err := st.Recv()
		if err != nil {
			return err
		}
		if seq := m.GetBatch().GetSequence(); seq != 8 || len(m.GetBatch().GetMeasurements()) != 1 {
			return status.Errorf(codes.InvalidArgument, "batch %d", seq)
		}
		if err := st.Send(receipt(8)); err != nil {
			return err
		}
		if m, err = st.Recv(); err != nil || m.GetEnd() == nil {
			return errors.New("no end")
		}
		return st.Send(closing)
	})
	f, err := Open(limited(t), conn, Drive{Name: "watch", Continue: true})
	if err != nil {
		t.Fatal(err)
	}
	if f.Name() != "watch" {
		t.Errorf("its name is %q", f.Name())
	}
	if err := f.Send(measurement(1)); err != nil {
		t.Fatal(err)
	}
	if _, err := f.Close(); err != nil {
		t.Error(err)
	}
}

// TestEndedElsewhere: a drive that the server ends beside its feed ends the feed
// with the reason DRIVE_ENDED, whatever the feed does next; and one that had all
// acknowledged before that ends as if by itself.
func TestEndedElsewhere(t *testing.T) {
	for _, c := range []struct {
		name    string
		receipt bool
		then    func(f *Feed) error
		ended   bool // by somebody else
	}{
		{"sends", true, func(f *Feed) error {
			<-f.done
			for i := range 50 {
				if err := f.Send(measurement(i)); err != nil {
					return err
				}
			}
			return nil
		}, true},
		{"leaves", true, func(f *Feed) error { <-f.done; return f.Leave() }, true},
		{"closes, with a batch that was not taken", false, func(f *Feed) error { <-f.done; _, err := f.Close(); return err }, true},
	} {
		conn := against(t, func(st serverStream) error {
			if _, err := st.Recv(); err != nil {
				return err
			}
			if err := st.Send(opened(0, 10, 1000)); err != nil {
				return err
			}
			if _, err := st.Recv(); err != nil {
				return err
			}
			if c.receipt {
				if err := st.Send(receipt(1)); err != nil {
					return err
				}
			}
			return st.Send(closing)
		})
		f, err := Open(limited(t), conn, Drive{Name: "d", Header: &leadlinev1.DriveHeader{Vehicle: "v"}})
		if err != nil {
			t.Fatal(err)
		}
		if err := f.Send(measurement(1)); err != nil {
			t.Fatal(err)
		}
		if err := f.Flush(); err != nil {
			t.Fatal(err)
		}
		err = c.then(f)
		why, ok := WhyOf(err)
		if c.ended != ok || ok && (why.Reason != leadlinev1.Reason_REASON_DRIVE_ENDED || why.About["drive"] != "d" || why.About["vehicle"] != "v") {
			t.Errorf("%s: %v, %+v", c.name, err, why)
		}
		if f.Ended().GetPosteriors() != 7 {
			t.Errorf("%s: the server's last word is lost: %v", c.name, f.Ended())
		}
		f.Abort()
	}
}
