package web

import (
	"context"
	"errors"
	"io"
	"net"
	"strings"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connectproto"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/peer"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Codes have the same numbers in gRPC and Connect.
var _ = [1]struct{}{}[int(connect.CodeUnauthenticated)-int(codes.Unauthenticated)]

// unary runs one call of a grpc.Server for Connect.
func (s *Server) unary(impl any, m grpc.MethodDesc) connect.ServerFunc {
	return func(ctx context.Context, spec connect.Spec, stream connect.ServerStream) error {
		c := newCall(ctx, spec, stream)
		response, err := m.Handler(impl, c.ctx, c.RecvMsg, s.cfg.Unary)
		if err != nil {
			return outward(err)
		}
		return stream.Send(response)
	}
}

// stream runs one stream of a grpc.Server for Connect.
func (s *Server) stream(impl any, d grpc.StreamDesc) connect.ServerFunc {
	return func(ctx context.Context, spec connect.Spec, stream connect.ServerStream) error {
		c := newCall(ctx, spec, stream)
		if s.cfg.Stream == nil {
			return outward(d.Handler(impl, c))
		}
		info := &grpc.StreamServerInfo{FullMethod: spec.Procedure, IsServerStream: d.ServerStreams, IsClientStream: d.ClientStreams}
		return outward(s.cfg.Stream(impl, c, info, d.Handler))
	}
}

// call is a call of Connect as a handler written for gRPC sees it.
type call struct {
	ctx    context.Context
	info   *connect.CallInfo
	stream connect.ServerStream

	received bool // the request
	early    bool // the headers go once it is
}

var (
	_ grpc.ServerStream          = (*call)(nil)
	_ grpc.ServerTransportStream = transport{}
)

func newCall(ctx context.Context, spec connect.Spec, stream connect.ServerStream) *call {
	info, _ := connect.CallInfoForServerContext(ctx)
	c := &call{info: info, stream: stream}
	md := metadata.MD{}
	for key, values := range info.RequestHeader().All() {
		md[strings.ToLower(key)] = values
	}
	ctx = metadata.NewIncomingContext(ctx, md)
	from := &peer.Peer{Addr: address(info.PeerAddr)}
	if state := encryptionOf(ctx); state != nil {
		from.AuthInfo = AuthInfo(*state)
	}
	ctx = peer.NewContext(ctx, from)
	c.ctx = grpc.NewContextWithServerTransportStream(ctx, transport{c, spec.Procedure})
	return c
}

// address is a peer's address in words.
type address string

func (address) Network() string  { return "tcp" }
func (a address) String() string { return string(a) }

var _ net.Addr = address("")

func (c *call) Context() context.Context { return c.ctx }

func (c *call) SetHeader(md metadata.MD) error {
	add(c.info.ResponseHeader(), md)
	return nil
}

// SendHeader sends the headers of a stream at once, but not before the request
// has been read: net/http closes a request's body when the answer begins. A
// unary call has them sent with its answer.
func (c *call) SendHeader(md metadata.MD) error {
	add(c.info.ResponseHeader(), md)
	if !c.received {
		c.early = true
		return nil
	}
	return inward(c.stream.SendHeaders())
}

func (c *call) RecvMsg(m any) error {
	if err := inward(c.stream.Receive(m)); err != nil {
		return err
	}
	c.received = true
	if c.early {
		c.early = false
		return inward(c.stream.SendHeaders())
	}
	return nil
}

func (c *call) SetTrailer(md metadata.MD) { add(c.info.ResponseTrailer(), md) }
func (c *call) SendMsg(m any) error       { return inward(c.stream.Send(m)) }

func add(h *connect.Header, md metadata.MD) {
	for key, values := range md {
		for _, v := range values {
			h.Add(key, v)
		}
	}
}

// transport is what grpc.SetHeader and its like look for in a context.
type transport struct {
	*call
	method string
}

func (t transport) Method() string { return t.method }

func (t transport) SetTrailer(md metadata.MD) error {
	t.call.SetTrailer(md)
	return nil
}

// inward makes gRPC's error of Connect's. What could not be read as a message
// has the reason of a bad field.
func inward(err error) error {
	switch {
	case err == nil:
		return nil
	case errors.Is(err, io.EOF):
		return io.EOF
	}
	var ce *connect.Error
	if !errors.As(err, &ce) {
		return status.FromContextError(err).Err()
	}
	said := strings.ReplaceAll(ce.Message(), "\u00a0", " ") // protobuf varies its spaces
	if code := codes.Code(ce.Code()); code != codes.InvalidArgument {
		return status.New(code, said).Err()
	}
	return reworded(said).Err()
}

// because adds a reason to a status, and what it is about as keys and values.
func because(st *status.Status, r leadlinev1.Reason, about ...string) *status.Status {
	on := map[string]string{}
	for i := 0; i < len(about); i += 2 {
		on[about[i]] = about[i+1]
	}
	with, err := st.WithDetails(&errdetails.ErrorInfo{
		Domain: string(leadlinev1.File_leadline_v1_reason_proto.Package()),
		Reason: strings.TrimPrefix(r.String(), "REASON_"), Metadata: on,
	})
	if err != nil {
		panic("web: " + err.Error()) // only for a status that is OK
	}
	return with
}

// outward makes Connect's error of a handler's, with its details.
func outward(err error) error {
	if err == nil {
		return nil
	}
	st, ok := status.FromError(err)
	if !ok {
		st = status.FromContextError(err) // as gRPC does
	}
	out := connect.NewError(connect.Code(st.Code()), st.Message())
	for _, d := range st.Proto().GetDetails() {
		detail, err := connectproto.NewErrorDetail(d)
		if err != nil {
			continue // the message still says what was wrong
		}
		out = out.WithDetail(detail)
	}
	return out
}
