package client

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"net"
	"slices"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// other is a script for calls other than Feed.
type other struct {
	leadlinev1.UnimplementedPositionServiceServer
	follow func(*leadlinev1.FollowRequest, grpc.ServerStreamingServer[leadlinev1.FollowResponse]) error
	upload func(grpc.ClientStreamingServer[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]) error
}

func (o other) Follow(r *leadlinev1.FollowRequest, st grpc.ServerStreamingServer[leadlinev1.FollowResponse]) error {
	return o.follow(r, st)
}

func (o other) UploadMap(st grpc.ClientStreamingServer[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]) error {
	return o.upload(st)
}

func badToken() error {
	st, _ := status.New(codes.InvalidArgument, "no such token").WithDetails(&errdetails.ErrorInfo{Domain: "leadline.v1", Reason: "BAD_TOKEN"})
	return st.Err()
}

// TestFollow proves that a stream that breaks is resumed with the token of the
// last update, that one that the server has forgotten begins anew, and that
// what ends it for good comes back.
func TestFollow(t *testing.T) {
	var tokens []string
	conn := serveUntilEnd(t, other{follow: func(r *leadlinev1.FollowRequest, st grpc.ServerStreamingServer[leadlinev1.FollowResponse]) error {
		tokens = append(tokens, r.GetResumeToken())
		send := func(from, to int) {
			for i := from; i < to; i++ {
				_ = st.Send(&leadlinev1.FollowResponse{Vehicle: "v", ResumeToken: fmt.Sprint(i)})
			}
		}
		switch len(tokens) {
		case 1:
			send(0, 3)
			return status.Error(codes.Unavailable, "the server stops")
		case 2:
			return status.Error(codes.Unavailable, "not yet")
		case 3:
			send(3, 4)
			return nil
		case 4:
			return badToken()
		case 5:
			send(10, 12)
			return status.Error(codes.Unavailable, "again")
		}
		return status.Error(codes.Aborted, "taken over")
	}})
	var got, breaks []string
	f := Following{
		Request:  &leadlinev1.FollowRequest{},
		OnUpdate: func(m *leadlinev1.FollowResponse) error { got = append(got, m.GetResumeToken()); return nil },
		OnBreak: func(err error, anew bool) {
			breaks = append(breaks, fmt.Sprint(status.Convert(err).Message(), " ", anew))
		},
	}
	err := Follow(limited(t), conn, f)
	if status.Code(err) != codes.Aborted {
		t.Errorf("it ended with %v", err)
	}
	if want := []string{"0", "1", "2", "3", "10", "11"}; !slices.Equal(got, want) {
		t.Errorf("told %q, want %q", got, want)
	}
	if want := []string{"", "2", "2", "3", "", "11"}; !slices.Equal(tokens, want) {
		t.Errorf("asked with the tokens %q, want %q", tokens, want)
	}
	if want := []string{"the server stops false", "not yet false", "the server ended the stream without a word false", "no such token true", "again false"}; !slices.Equal(breaks, want) {
		t.Errorf("breaks %q, want %q", breaks, want)
	}
	// An own error, and an end.
	tokens = nil
	enough := errors.New("enough")
	f.OnUpdate = func(*leadlinev1.FollowResponse) error { return enough }
	if err := Follow(limited(t), conn, f); !errors.Is(err, enough) {
		t.Errorf("it ended with %v, want the caller's own error", err)
	}
	tokens = nil
	ctx, cancel := context.WithCancel(limited(t))
	f.OnUpdate = func(*leadlinev1.FollowResponse) error { cancel(); return nil }
	if err := Follow(ctx, conn, f); !errors.Is(err, context.Canceled) {
		t.Errorf("it ended with %v, want that the context was", err)
	}
}

// TestFollowNobody proves that where nobody listens is an error at once.
func TestFollowNobody(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	address := l.Addr().String()
	l.Close()
	conn, err := Dial(address)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	if err := Follow(limited(t), conn, Following{Request: &leadlinev1.FollowRequest{}}); status.Code(err) != codes.Unavailable {
		t.Errorf("following nobody: %v", err)
	}
}

// TestSendMap proves that a file arrives whole, with its size and checksum,
// and that a server's refusal in the middle comes back.
func TestSendMap(t *testing.T) {
	for _, size := range []int{1, mapChunk, 3*mapChunk + 17} {
		content := bytes.Repeat([]byte("0123456789abcdef"), size/16+1)[:size]
		conn := serveUntilEnd(t, other{upload: func(st grpc.ClientStreamingServer[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]) error {
			m, err := st.Recv()
			if err != nil {
				return err
			}
			b := m.GetBeginning()
			var got []byte
			for {
				m, err := st.Recv()
				if errors.Is(err, io.EOF) {
					break
				}
				if err != nil {
					return err
				}
				got = append(got, m.GetChunk()...)
			}
			sum := sha256.Sum256(got)
			if b.GetName() != "bay" || !b.GetReplace() || b.GetBytes() != uint64(len(got)) || b.GetSha256() != hex.EncodeToString(sum[:]) || !bytes.Equal(got, content) {
				return status.Errorf(codes.InvalidArgument, "%v for %d bytes", b, len(got))
			}
			return st.SendAndClose(&leadlinev1.UploadMapResponse{Map: &leadlinev1.MapDescription{Name: b.GetName()}})
		}})
		var last int64
		m, err := SendMap(limited(t), conn, &leadlinev1.MapBeginning{Name: "bay", Replace: true}, bytes.NewReader(content), func(sent, of int64) {
			if sent <= last || of != int64(size) {
				t.Errorf("%d of %d sent after %d", sent, of, last)
			}
			last = sent
		})
		if err != nil || !proto.Equal(m, &leadlinev1.MapDescription{Name: "bay"}) || last != int64(size) {
			t.Errorf("%d bytes: %v, %v, %d sent", size, m, err, last)
		}
	}
	conn := serveUntilEnd(t, other{upload: func(st grpc.ClientStreamingServer[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]) error {
		_, _ = st.Recv()
		return status.Error(codes.AlreadyExists, "there is one")
	}})
	if _, err := SendMap(limited(t), conn, &leadlinev1.MapBeginning{}, strings.NewReader(strings.Repeat("x", 20*mapChunk)), nil); status.Code(err) != codes.AlreadyExists {
		t.Errorf("refused: %v", err)
	}
}
