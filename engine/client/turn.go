package client

import (
	"context"
	"errors"
	"io"
	"net"
	"slices"
	"sync"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/peer"
	"google.golang.org/grpc/resolver"
	"google.golang.org/grpc/resolver/manual"
)

// turning has the calls of a connection to several servers go to another one when
// the one that is used says that it is cut off from what it shares with the others:
// its connection would last.
type turning struct {
	r   *manual.Resolver
	all []resolver.Address
	// aside is for how long a server is left aside.
	aside time.Duration

	mu   sync.Mutex
	away *resolver.Address // is not used for a while
	back *time.Timer
}

// turnedFor is for how long a server is left aside: what is cut off takes a while to be
// put back, and one that is asked too early says so again.
const turnedFor = 15 * time.Second

func (t *turning) options() []grpc.DialOption {
	return []grpc.DialOption{grpc.WithResolvers(t.r), grpc.WithUnaryInterceptor(t.unary), grpc.WithStreamInterceptor(t.stream)}
}

// heard takes what a call to a server has ended with.
func (t *turning) heard(from net.Addr, err error) {
	why, ours := WhyOf(err)
	if !ours || why.About["server"] != "cut off" || from == nil {
		return
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	i := slices.IndexFunc(t.all, func(a resolver.Address) bool { return names(a.Addr, from.String()) })
	if i < 0 || t.away != nil && t.away.Addr == t.all[i].Addr {
		return
	}
	turn := t.all[i]
	t.away = &turn
	t.r.UpdateState(resolver.State{Addresses: slices.Concat(t.all[i+1:], t.all[:i])})
	if t.back != nil {
		t.back.Stop()
	}
	t.back = time.AfterFunc(t.aside, func() {
		t.mu.Lock()
		defer t.mu.Unlock()
		if t.away == &turn {
			t.away = nil
			t.r.UpdateState(resolver.State{Addresses: slices.Concat(t.all[i+1:], t.all[:i+1])})
		}
	})
}

// names reports whether a server's address, which may have a host's name, is the one
// that a connection has.
func names(address, connected string) bool {
	if address == connected {
		return true
	}
	host, port, err := net.SplitHostPort(address)
	at, atPort, err2 := net.SplitHostPort(connected)
	if err != nil || err2 != nil || port != atPort {
		return false
	}
	ips, _ := net.LookupHost(host)
	return slices.Contains(ips, at)
}

func (t *turning) unary(ctx context.Context, method string, req, reply any, cc *grpc.ClientConn, call grpc.UnaryInvoker, opts ...grpc.CallOption) error {
	var p peer.Peer
	err := call(ctx, method, req, reply, cc, append(opts, grpc.Peer(&p))...)
	t.heard(p.Addr, err)
	return err
}

func (t *turning) stream(ctx context.Context, desc *grpc.StreamDesc, cc *grpc.ClientConn, method string, open grpc.Streamer, opts ...grpc.CallOption) (grpc.ClientStream, error) {
	st, err := open(ctx, desc, cc, method, opts...)
	if err != nil {
		return nil, err
	}
	return &turnedStream{st, t}, nil
}

type turnedStream struct {
	grpc.ClientStream
	t *turning
}

func (s *turnedStream) RecvMsg(m any) error {
	err := s.ClientStream.RecvMsg(m)
	if err != nil && !errors.Is(err, io.EOF) {
		if p, ok := peer.FromContext(s.Context()); ok {
			s.t.heard(p.Addr, err)
		}
	}
	return err
}
