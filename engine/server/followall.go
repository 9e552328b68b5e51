package server

import (
	"context"
	"encoding/base64"
	"encoding/json"
	"errors"
	"slices"
	"sync"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

type newsStream = grpc.ServerStreamingServer[leadlinev1.FollowResponse]

// lookEvery is how often servers that have come are looked for.
const lookEvery = 500 * time.Millisecond

// maxTokens bounds a resume token of several servers.
const maxTokens = 64 << 10

// followAll follows at every server, this one included: each tells of the vehicles
// that it serves, and a vehicle that moves is told of by another. A token to resume
// holds one of each server.
func (s *Server) followAll(req *leadlinev1.FollowRequest, stream newsStream) error {
	tokens, err := splitToken(req.GetResumeToken())
	if err != nil {
		return err
	}
	ctx, cancel := context.WithCancel(stream.Context())
	g := &gathering{s: s, req: req, ctx: ctx, news: make(chan fromServer), failed: make(chan error, 1), tokens: tokens, at: map[string]bool{}}
	defer g.all.Wait()
	defer cancel()
	j := s.joined()
	here := ""
	if j != nil {
		here = j.ID()
	}
	g.follow(here, func(req *leadlinev1.FollowRequest, each func(*leadlinev1.FollowResponse) error) error {
		return s.followHere(req, &localFollow{ctx: ctx, send: each})
	})
	tick := time.NewTicker(lookEvery)
	defer tick.Stop()
	for {
		for _, at := range s.shared.others() {
			g.follow(at.ID, func(req *leadlinev1.FollowRequest, each func(*leadlinev1.FollowResponse) error) error {
				return s.followAt(ctx, at, req, each)
			})
		}
		select {
		case n := <-g.news:
			n.response.ResumeToken = g.joined(n.server, n.response.GetResumeToken())
			if err := stream.Send(n.response); err != nil {
				return err
			}
		case err := <-g.failed:
			return err
		case <-tick.C:
		case <-s.draining:
			return errStopping
		case <-ctx.Done():
			return gone(ctx)
		}
	}
}

// gathering is one stream that follows at several servers.
type gathering struct {
	s      *Server
	req    *leadlinev1.FollowRequest
	ctx    context.Context
	news   chan fromServer
	failed chan error
	all    sync.WaitGroup

	mu     sync.Mutex
	at     map[string]bool   // servers that are being followed at
	tokens map[string]string // of the last that was told of each
}

// joined is the token of all, with a server's latest.
func (g *gathering) joined(server, token string) string {
	g.mu.Lock()
	defer g.mu.Unlock()
	if token != "" {
		g.tokens[server] = token
	}
	return joinTokens(g.tokens)
}

type fromServer struct {
	server   string
	response *leadlinev1.FollowResponse
}

// follow follows at a server, unless that is done already, until it is there no
// more.
func (g *gathering) follow(server string, at func(*leadlinev1.FollowRequest, func(*leadlinev1.FollowResponse) error) error) {
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.at[server] {
		return
	}
	g.at[server] = true
	req := proto.CloneOf(g.req)
	req.ResumeToken = g.tokens[server]
	g.all.Go(func() {
		err := at(req, func(m *leadlinev1.FollowResponse) error {
			select {
			case g.news <- fromServer{server, m}:
				return nil
			case <-g.ctx.Done():
				return gone(g.ctx)
			}
		})
		stale := req.GetResumeToken() != "" && failure(err).GetReason() == leadlinev1.Reason_REASON_BAD_TOKEN
		switch code := status.Code(err); {
		case g.ctx.Err() != nil:
			return
		case stale:
			// That server knows the stream no more: the present state comes first.
		case code != codes.Unavailable && code != codes.Canceled:
			select {
			case g.failed <- err:
			default:
			}
			return
		}
		select {
		case <-time.After(lookEvery):
		case <-g.ctx.Done():
		}
		g.mu.Lock()
		defer g.mu.Unlock()
		delete(g.at, server)
		if stale || !slices.ContainsFunc(g.s.shared.others(), func(o share.Server) bool { return o.ID == server }) {
			delete(g.tokens, server)
		}
	})
}

// followAt follows at another server.
func (s *Server) followAt(ctx context.Context, at share.Server, req *leadlinev1.FollowRequest, each func(*leadlinev1.FollowResponse) error) error {
	c, err := s.peer(ctx, at)
	if err != nil {
		return err
	}
	there, err := c.Follow(onward(ctx), req)
	for err == nil {
		var m *leadlinev1.FollowResponse
		if m, err = there.Recv(); err == nil {
			err = each(m)
		}
	}
	return err
}

// localFollow is a stream within this server.
type localFollow struct {
	grpc.ServerStream
	ctx  context.Context
	send func(*leadlinev1.FollowResponse) error
}

func (l *localFollow) Context() context.Context                { return l.ctx }
func (l *localFollow) Send(m *leadlinev1.FollowResponse) error { return l.send(m) }

// joinTokens and splitToken make one token of several servers' and take it apart.
func joinTokens(of map[string]string) string {
	text, err := json.Marshal(of)
	if err != nil {
		panic("server: " + err.Error()) // names and tokens always have JSON
	}
	return base64.RawURLEncoding.EncodeToString(text)
}

func splitToken(token string) (map[string]string, error) {
	of := map[string]string{}
	if token == "" {
		return of, nil
	}
	text, err := base64.RawURLEncoding.DecodeString(token)
	if err == nil && len(token) > maxTokens {
		err = errors.New("it is too long")
	}
	if err == nil {
		err = json.Unmarshal(text, &of)
	}
	if err != nil || of == nil {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": "resume_token"}, "follow: resume_token is none of these servers': follow without one")
	}
	return of, nil
}
