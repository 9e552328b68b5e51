package server

import (
	"google.golang.org/grpc/encoding"
	_ "google.golang.org/grpc/encoding/proto" // registers its codec
	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// arrival is a message of a feed with the bytes of its batch: the journal takes them
// as they came, which to encode them again would double the cost of.
type arrival struct {
	message *leadlinev1.FeedRequest
	batch   []byte // nil where the message is another one, or a batch in pieces
}

// feedCodec reads messages as gRPC's own does, and arrivals.
type feedCodec struct{ encoding.CodecV2 }

func newFeedCodec() feedCodec { return feedCodec{encoding.GetCodecV2("proto")} }

func (c feedCodec) Unmarshal(data mem.BufferSlice, v any) error {
	a, ok := v.(*arrival)
	if !ok {
		return c.CodecV2.Unmarshal(data, v)
	}
	b := data.Materialize() // its own: data is somebody else's in a moment
	a.message = new(leadlinev1.FeedRequest)
	if err := proto.Unmarshal(b, a.message); err != nil {
		return err
	}
	a.batch = soleBatch(b)
	return nil
}

// batchField is the number of batch in FeedRequest.
const batchField = 2

// soleBatch is the batch in an encoded FeedRequest that holds it once and nothing else;
// else nil. Twice is once, by protobuf's rules: the two are merged.
func soleBatch(b []byte) []byte {
	number, kind, n := protowire.ConsumeTag(b)
	if n < 0 || number != batchField || kind != protowire.BytesType {
		return nil
	}
	batch, m := protowire.ConsumeBytes(b[n:])
	if m < 0 || n+m != len(b) {
		return nil
	}
	return batch[:len(batch):len(batch)]
}
