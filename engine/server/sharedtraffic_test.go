package server

import (
	"context"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/server/identity"
	"leadline/engine/traffic"
	"leadline/engine/wire"
	"leadline/fixtures/credentials"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestShareTraffic proves that roads are fed, asked for and followed through any of
// several servers, encrypted and by tokens; that who calls is passed on with the
// call, and checked where the road is served; and that saying that a call was
// passed on opens nothing.
func TestShareTraffic(t *testing.T) {
	if testing.Short() {
		t.Skip("several servers: not with -short")
	}
	suite, err := sensor.ParseSuite("road", []byte(scenes.TwoPosts))
	if err != nil {
		t.Fatal(err)
	}
	folder := t.TempDir()
	ca := credentials.NewAuthority(t)
	caFile := ca.File(t, filepath.Join(folder, "ca.pem"))
	files := ca.Server(t, folder, "fleet.example")
	access, token := byToken(t)
	dial := func(a string, s client.Security) *grpc.ClientConn {
		t.Helper()
		s.AuthorityFile = caFile
		conn, err := client.DialSecure(a, s)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { conn.Close() })
		return conn
	}
	guarded := func(c *Config) {
		tls := &identity.Encryption{Certificate: files.Certificate, Key: files.Key, Clients: caFile}
		if err := tls.Open(); err != nil {
			t.Fatal(err)
		}
		c.Encryption, c.Access = tls.Config(), &Access{Tokens: access.Tokens, Certificates: true}
		c.Suites = map[string]*sensor.Suite{"road": suite}
		c.Share.Dial = func(a string) (*grpc.ClientConn, error) {
			return client.DialSecure(a, client.Security{AuthorityFile: caFile})
		}
	}
	o := atBroker(t)
	o.Shared, o.Partitions = true, 2
	servers := []*life{among(t, o, guarded), among(t, o, guarded)}
	balanced(t, o.Partitions, servers...)
	names := make([]string, len(servers)) // a road that each serves
	for i := 0; names[0] == "" || names[1] == ""; i++ {
		name := fmt.Sprint("r", i)
		at := 1
		if servers[0].s.joined().Where(servers[0].s.journal.Partition(name)).Server == nil {
			at = 0
		}
		names[at] = name
	}
	alone, err := traffic.Open(suite)
	if err != nil {
		t.Fatal(err)
	}
	evs := scenes.PastTwoPosts(began)
	for i, ev := range evs {
		if evs[i], err = wire.ToEvent(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
		if err := alone.Take(evs[i]); err != nil {
			t.Fatal(err)
		}
	}
	if err := alone.Flush(); err != nil {
		t.Fatal(err)
	}
	soon := time.Now().Add(time.Hour)
	dispatcher := token("anna", "roles", "dispatcher")
	for i, name := range names {
		other := servers[1-i].addr
		through := dial(other, client.Security{})
		c := leadlinev1.NewPositionServiceClient(through)
		open := func(ctx context.Context) (*leadlinev1.Closed, error) {
			return fed(ctx, through, client.Drive{Header: &leadlinev1.DriveHeader{Vehicle: name, Suite: "road", Traffic: true}, Name: "d", Batch: 16}, evs)
		}
		follow := func(ctx context.Context, c leadlinev1.PositionServiceClient) error {
			st, err := c.FollowTraffic(ctx, &leadlinev1.FollowTrafficRequest{Traffic: &leadlinev1.TrafficRequest{Road: name}})
			if err == nil {
				_, err = st.Recv()
			}
			return err
		}
		ask := func(ctx context.Context, c leadlinev1.PositionServiceClient) error {
			_, err := c.Traffic(ctx, &leadlinev1.TrafficRequest{Road: name})
			return err
		}
		closed, err := open(showing(t, token(name, "roles", "vehicle")))
		if err != nil || closed.GetTraffic().GetStateSha256() != alone.Hash() || !closed.GetTraffic().GetDurable() {
			t.Fatalf("%s, fed through the other server: %v, %v", name, closed, err)
		}
		for _, l := range servers {
			here := leadlinev1.NewPositionServiceClient(dial(l.addr, client.Security{}))
			r, err := here.Traffic(showing(t, dispatcher), &leadlinev1.TrafficRequest{Road: name, Shape: true})
			if err != nil || r.GetPicture().GetStateSha256() != alone.Hash() || r.GetDrive() != "d" || len(r.GetShape().GetPosts()) != 2 {
				t.Errorf("%s is %v, %v", name, r, err)
			}
			if err := follow(showing(t, dispatcher), here); err != nil {
				t.Errorf("%s followed: %v", name, err)
			}
		}
		owner := leadlinev1.NewPositionServiceClient(dial(servers[i].addr, client.Security{}))
		passedOn := func(ctx context.Context) context.Context {
			return metadata.AppendToOutgoingContext(ctx, forwardedHeader, "1")
		}
		van := leadlinev1.NewPositionServiceClient(dial(other, asClient(t, ca, soon, "leadline://vehicle/"+name)))
		stranger, administrator := token("stranger", "roles", "vehicle"), token("adam", "roles", "administrator")
		_, fedByStranger := open(showing(t, stranger))
		_, fedByNobody := open(limited(t))
		for _, w := range []struct {
			what   string
			err    error
			reason leadlinev1.Reason
			words  string
		}{
			{"fed by nobody", fedByNobody, leadlinev1.Reason_REASON_NO_IDENTITY, "token"},
			{"fed by another", fedByStranger, leadlinev1.Reason_REASON_NOT_ALLOWED, name},
			{"asked by nobody", ask(limited(t), c), leadlinev1.Reason_REASON_NO_IDENTITY, "token"},
			{"asked by another", ask(showing(t, stranger), c), leadlinev1.Reason_REASON_NOT_ALLOWED, name},
			{"followed by another", follow(showing(t, stranger), c), leadlinev1.Reason_REASON_NOT_ALLOWED, name},
			{"asked by an administrator", ask(showing(t, administrator), c), leadlinev1.Reason_REASON_NOT_ALLOWED, "administrator"},
			{"by a certificate alone", ask(limited(t), van), leadlinev1.Reason_REASON_NOT_OFFERED, "at " + servers[i].addr},
			{"followed by a certificate alone", follow(limited(t), van), leadlinev1.Reason_REASON_NOT_OFFERED, "at " + servers[i].addr},
			{"said to be passed on, by nobody", ask(passedOn(limited(t)), owner), leadlinev1.Reason_REASON_NO_IDENTITY, "token"},
			{"said to be passed on, by another", ask(passedOn(showing(t, stranger)), owner), leadlinev1.Reason_REASON_NOT_ALLOWED, name},
		} {
			if got := saidBy(w.err); w.err == nil || got.reason != w.reason || !strings.Contains(got.message, w.words) {
				t.Errorf("%s %s: %v, want %v with %q", name, w.what, w.err, w.reason, w.words)
			}
		}
		if err := ask(limited(t), leadlinev1.NewPositionServiceClient(dial(servers[i].addr, asClient(t, ca, soon, "leadline://vehicle/"+name)))); err != nil {
			t.Errorf("%s by its certificate, where it is: %v", name, err)
		}
		l, err := c.ListVehicles(showing(t, dispatcher), &leadlinev1.ListVehiclesRequest{Traffic: true})
		if err != nil || len(l.GetVehicles()) != i+1 {
			t.Errorf("listed roads: %v, %v", l, err)
		}
	}
	// Which roads there are is told of all, whoever is asked.
	for i, l := range servers {
		ctx, cancel := context.WithCancel(showing(t, dispatcher))
		st, err := leadlinev1.NewPositionServiceClient(dial(l.addr, client.Security{})).Follow(ctx, &leadlinev1.FollowRequest{Roads: true})
		if err != nil {
			t.Fatal(err)
		}
		got := nextRoads(t, st, len(names))
		cancel()
		slices.Sort(got)
		want := []string{names[0] + " d true false", names[1] + " d true false"}
		slices.Sort(want)
		if !slices.Equal(got, want) {
			t.Errorf("server %d tells of %q, want %q", i, got, want)
		}
	}
	for _, l := range servers {
		l.stop(limited(t))
	}
}

// asClient is a client certificate for a name.
func asClient(t *testing.T, ca *credentials.Authority, until time.Time, name string) client.Security {
	t.Helper()
	files := ca.Client(t, t.TempDir(), until, name)
	return client.Security{CertificateFile: files.Certificate, KeyFile: files.Key}
}
