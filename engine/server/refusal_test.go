package server

import (
	"math"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestRefusals proves that a measurement that cannot be used is refused with a
// reason, alone: its neighbours are used.
func TestRefusals(t *testing.T) {
	_, conn := serve(t, Config{})
	good := voyage(6, 10)
	at := timestamppb.New(time.Unix(0, int64(began+2e9)))
	z := func(m *leadlinev1.Measurement) *leadlinev1.SensorMeasurement {
		return &leadlinev1.SensorMeasurement{Time: at, Number: 77, Measurement: m}
	}
	fix := func(lon, lat, sigma float64) *leadlinev1.SensorMeasurement {
		return z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Fix{Fix: &leadlinev1.Fix{Lon: &lon, Lat: &lat, SigmaM: sigma}}})
	}
	heading := func(deg, sigma float64) *leadlinev1.SensorMeasurement {
		return z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Heading{Heading: &leadlinev1.Heading{Deg: deg, SigmaDeg: sigma}}})
	}
	late := wire.FromEvent(good[0])
	late.Time = timestamppb.New(time.Unix(0, int64(began-3600e9)))
	late.Measurement = fix(5, 53, 1).Measurement
	early := fix(5, 53, 1)
	early.Time = timestamppb.New(time.Unix(0, int64(began+1e15)))
	other := wire.FromEvent(good[len(good)-1])
	other.Measurement = fix(5, 53, 1).Measurement
	long := fix(5, 53, 1)
	long.Sensor = strings.Repeat("é", 4000)
	bad := []struct {
		m      *leadlinev1.SensorMeasurement
		reason leadlinev1.Reason
		words  string
	}{
		{&leadlinev1.SensorMeasurement{}, leadlinev1.Reason_REASON_UNUSABLE, "time: missing"},
		{z(nil), leadlinev1.Reason_REASON_UNUSABLE, "no kind"},
		{fix(math.NaN(), 53, 1), leadlinev1.Reason_REASON_UNUSABLE, "not on the globe"},
		{fix(5, 53, -1), leadlinev1.Reason_REASON_UNUSABLE, "sigma_m is -1"},
		{heading(math.Inf(1), 1), leadlinev1.Reason_REASON_UNUSABLE, "deg is +Inf"},
		{heading(5, math.NaN()), leadlinev1.Reason_REASON_UNUSABLE, "sigma_deg is NaN"},
		{z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Range{Range: &leadlinev1.Range{
			Beacon: &leadlinev1.Beacon{Place: &leadlinev1.Beacon_Id{Id: "nobody"}}, RangeM: 5, SigmaM: 1,
		}}}), leadlinev1.Reason_REASON_UNUSABLE, "nobody"},
		{z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Sighting{Sighting: &leadlinev1.Sighting{
			Place: &leadlinev1.Sighting_Road{Road: "High Street"}, Mistaken: 0.1,
		}}}), leadlinev1.Reason_REASON_WRONG_SPACE, "road"},
		{late, leadlinev1.Reason_REASON_TOO_LATE, "late_window_s"},
		{early, leadlinev1.Reason_REASON_TOO_EARLY, "clock"},
		{other, leadlinev1.Reason_REASON_CONFLICTING, "number"},
		{long, leadlinev1.Reason_REASON_UNUSABLE, "sensor is 8000 bytes long"},
	}
	first := batch(1, good...)
	second := &leadlinev1.Batch{Sequence: 2}
	for _, b := range bad {
		second.Measurements = append(second.Measurements, b.m)
	}
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	for _, m := range []*leadlinev1.FeedRequest{first, {Message: &leadlinev1.FeedRequest_Batch{Batch: second}}, ending} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	m, err := st.Recv()
	if err != nil || m.GetReceipt().GetAccepted() != uint32(len(good)) {
		t.Fatalf("the good ones: %v, %v", m, err)
	}
	if m, err = st.Recv(); err != nil || m.GetReceipt().GetAccepted() != 0 || len(m.GetReceipt().GetRefusals()) != len(bad) {
		t.Fatalf("the bad ones: %v, %v; want %d refusals", m, err, len(bad))
	}
	for i, r := range m.GetReceipt().GetRefusals() {
		if r.GetReason() != bad[i].reason || !strings.Contains(r.GetDetail(), bad[i].words) || r.GetIndex() != uint32(i) || len(r.GetSensor()) > 1100 {
			t.Errorf("measurement %d: %v; want %v with %q", i, r, bad[i].reason, bad[i].words)
		}
	}
	want, _, _ := replayed(t, good)
	if m, err = st.Recv(); err != nil || m.GetClosed().GetRefused() != uint64(len(bad)) || m.GetClosed().GetPosteriorSha256() != want {
		t.Errorf("closed: %v, %v; want %d refused, hash %s as without them", m, err, len(bad), want)
	}
}

// TestEveryReasonHasAWord proves that no reason of a session is lost.
func TestEveryReasonHasAWord(t *testing.T) {
	for _, r := range []session.Reason{
		session.Unusable, session.TooLate, session.TooEarly, session.Conflicting,
		session.WrongSpace, session.Overfull,
	} {
		if measurementReasons[r] == leadlinev1.Reason_REASON_UNSPECIFIED {
			t.Errorf("no word for %q", r)
		}
	}
	for s := summary.Contradicted; s <= summary.Unsure; s++ {
		if statuses[s] == leadlinev1.Status_STATUS_UNSPECIFIED {
			t.Errorf("no word for %v", s)
		}
	}
}
