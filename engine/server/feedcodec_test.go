package server

import (
	"bytes"
	"testing"

	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	leadlinev1 "leadline/proto/leadline/v1"
)

// encodedFeed are requests as they may come: of a batch alone, and of all that is not.
func encodedFeed(t testing.TB) map[string][]byte {
	t.Helper()
	encode := func(m proto.Message) []byte {
		b, err := proto.Marshal(m)
		if err != nil {
			t.Fatal(err)
		}
		return b
	}
	m := &leadlinev1.SensorMeasurement{Time: &timestamppb.Timestamp{Seconds: 1_800_000_000}, Sensor: "odo", Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Travel{Travel: &leadlinev1.Travel{DistanceM: 3}}}}
	one := encode(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: &leadlinev1.Batch{Sequence: 300, Measurements: []*leadlinev1.SensorMeasurement{m, m}}}})
	other := encode(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: &leadlinev1.Batch{Sequence: 7}}})
	open := encode(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Open{Open: &leadlinev1.Open{Drive: "d"}}})
	return map[string][]byte{
		"a batch": one, "an empty one": encode(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: new(leadlinev1.Batch)}}),
		"twice": append(bytes.Clone(one), other...), "then another": append(bytes.Clone(one), open...), "after another": append(bytes.Clone(open), one...),
		"and more": append(bytes.Clone(one), protowire.AppendVarint(protowire.AppendTag(nil, 99, protowire.VarintType), 5)...),
		"open":     open, "end": encode(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_End{End: new(leadlinev1.End)}}),
		"nothing": {}, "cut off": one[:len(one)-1], "of another type": protowire.AppendVarint(protowire.AppendTag(nil, batchField, protowire.VarintType), 5),
	}
}

// checkArrival holds an arrival to what protobuf itself reads: the same message, and
// bytes that are its batch.
func checkArrival(t *testing.T, b []byte) (a arrival) {
	t.Helper()
	data := bytes.Clone(b)
	err := newFeedCodec().Unmarshal(mem.BufferSlice{mem.SliceBuffer(data)}, &a)
	clear(data) // it is gRPC's again
	want := new(leadlinev1.FeedRequest)
	if wrong := proto.Unmarshal(b, want); (err == nil) != (wrong == nil) {
		t.Fatalf("%x: %v, and protobuf says %v", b, err, wrong)
	} else if wrong != nil {
		return a
	}
	if !proto.Equal(a.message, want) {
		t.Fatalf("%x is read as %v, want %v", b, a.message, want)
	}
	if a.batch == nil {
		return a
	}
	got := new(leadlinev1.Batch)
	if err := proto.Unmarshal(a.batch, got); err != nil || !proto.Equal(got, want.GetBatch()) {
		t.Fatalf("%x: the bytes of the batch are those of %v (%v), want %v", b, got, err, want.GetBatch())
	}
	return a
}

// The journal gets a batch's own bytes where there are such, and none where a batch
// is put together of several pieces.
func TestArrival(t *testing.T) {
	for name, b := range encodedFeed(t) {
		a := checkArrival(t, b)
		if there := name == "a batch" || name == "an empty one"; (a.batch != nil) != there {
			t.Errorf("%s: bytes %x", name, a.batch)
		}
	}
}

func FuzzArrival(f *testing.F) {
	for _, b := range encodedFeed(f) {
		f.Add(b)
	}
	f.Fuzz(func(t *testing.T, b []byte) { checkArrival(t, b) })
}
