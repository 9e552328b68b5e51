package server

import (
	"context"
	"fmt"
	"log/slog"
	"net"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats.go/jetstream"
	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/server/share"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// openSea is the map of a file that says nothing.
func openSea(string) (Map, error) { return sea(), nil }

// among is a server that shares a journal, with what else is to be said of it.
func among(t *testing.T, o *journal.Options, more ...func(*Config)) *life {
	t.Helper()
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	mine := *o
	l := &life{t: t, addr: ln.Addr().String(), done: make(chan error, 1)}
	l.cfg = Config{
		Maps: []Map{sea()}, Journal: &mine, Build: "this", MaxCells: 1000,
		Share: &Share{Address: l.addr, Dial: func(a string) (*grpc.ClientConn, error) { return client.Dial(a) }, OpenMap: openSea, Lease: 2 * time.Second},
	}
	for _, change := range more {
		change(&l.cfg)
	}
	if l.s, err = New(l.cfg); err != nil {
		t.Fatal(err)
	}
	go func() { l.done <- l.s.Serve(ln) }()
	return l
}

// balanced waits until the partitions are spread evenly.
func balanced(t *testing.T, partitions int, of ...*life) {
	t.Helper()
	for end := time.Now().Add(time.Minute); ; time.Sleep(20 * time.Millisecond) {
		even, sum := true, 0
		for _, l := range of {
			n := 0
			if j := l.s.joined(); j != nil {
				n = j.Own()
			}
			even = even && n >= partitions/len(of)
			sum += n
		}
		if even && sum == partitions {
			return
		}
		if time.Now().After(end) {
			t.Fatal("the partitions are not spread evenly")
		}
	}
}

// TestShare proves that several servers on one journal are as one: each takes any
// vehicle and answers any question, whoever serves it; servers come and go, and
// the drives go on to the same posteriors as if nothing had been.
func TestShare(t *testing.T) {
	if testing.Short() {
		t.Skip("several servers: not with -short")
	}
	o := atBroker(t)
	o.Shared, o.Partitions = true, 6
	const vehicles = 8
	evs := voyage(3, 60)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	a, b := among(t, o), among(t, o)
	balanced(t, o.Partitions, a, b)
	all := strings.Join([]string{a.addr, b.addr}, ",")

	half := make(chan struct{}) // open once servers may go
	var atHalf, fleet sync.WaitGroup
	for v := range vehicles {
		atHalf.Add(1)
		fleet.Go(func() {
			name := fmt.Sprint("v", v)
			conn, err := client.Dial(all)
			if err != nil {
				t.Error(err)
				return
			}
			defer conn.Close()
			c, err := client.Carry(limited(t), conn, client.Drive{Header: header(name), Name: "d", Batch: 1})
			if err != nil {
				t.Error(err)
				atHalf.Done()
				return
			}
			for i, ev := range evs {
				if i == len(evs)/2 {
					atHalf.Done()
					<-half
				}
				if err := c.Send(wire.FromEvent(ev)); err != nil {
					t.Error(err)
					return
				}
			}
			closed, err := c.Close()
			if err != nil {
				t.Error(err)
				return
			}
			if closed.GetAccepted() != uint64(len(evs)) || closed.GetRefused() != 0 {
				t.Errorf("%s: %d accepted of %d, %d refused", name, closed.GetAccepted(), len(evs), closed.GetRefused())
			}
			if closed.GetPosteriorSha256() != want {
				t.Errorf("%s comes to other posteriors", name)
			}
		})
	}
	atHalf.Wait()
	askEach(t, vehicles, a, b)
	// One comes, and one leaves.
	c := among(t, o)
	balanced(t, o.Partitions, a, b, c)
	close(half)
	a.stop(limited(t))
	balanced(t, o.Partitions, b, c)
	func() { // so that all come through what is left
		conn, err := client.Dial(c.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		fleet.Wait()
		for v := range vehicles {
			if _, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{fmt.Sprint("v", v)}}); err != nil {
				t.Error(err)
			}
		}
	}()
	erased(t, vehicles, b, c)
	b.stop(limited(t))
	c.stop(limited(t))
}

// erased proves that a vehicle is erased through any server.
func erased(t *testing.T, vehicles int, of ...*life) {
	t.Helper()
	for v := range vehicles {
		conn, err := client.Dial(of[v%len(of)].addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		name := fmt.Sprint("v", v)
		resp, err := leadlinev1.NewPositionServiceClient(conn).EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: name})
		if err != nil || resp.GetDrives() != 1 || resp.GetRecords() == 0 {
			t.Errorf("%s is erased: %v, %v", name, resp, err)
		}
	}
	for _, l := range of {
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		page, err := leadlinev1.NewPositionServiceClient(conn).ListVehicles(limited(t), &leadlinev1.ListVehiclesRequest{})
		if err != nil || len(page.GetVehicles()) > 0 {
			t.Errorf("after all were erased there are %v, %v", page.GetVehicles(), err)
		}
	}
}

// askEach asks each server for all vehicles, by each of the calls that concern some.
func askEach(t *testing.T, vehicles int, of ...*life) {
	t.Helper()
	for _, l := range of {
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		c := leadlinev1.NewPositionServiceClient(conn)
		var names []string
		for v := range vehicles {
			names = append(names, fmt.Sprint("v", v))
		}
		resp, err := c.Where(limited(t), &leadlinev1.WhereRequest{Vehicles: append(names, "nobody")})
		if err != nil {
			t.Fatal(err)
		}
		for i, answer := range resp.GetAnswers() {
			switch {
			case i == vehicles && answer.GetFailure().GetReason() != leadlinev1.Reason_REASON_UNKNOWN_VEHICLE:
				t.Errorf("of a vehicle that is nowhere %v", answer)
			case i < vehicles && (answer.GetVehicle() != names[i] || answer.GetPosterior() == nil):
				t.Errorf("of %s %v", names[i], answer)
			}
		}
		var listed []string
		for token, more := "", true; more; more = token != "" {
			page, err := c.ListVehicles(limited(t), &leadlinev1.ListVehiclesRequest{PageSize: 3, PageToken: token})
			if err != nil {
				t.Fatal(err)
			}
			for _, v := range page.GetVehicles() {
				listed = append(listed, v.GetVehicle())
			}
			token = page.GetNextPageToken()
		}
		if fmt.Sprint(listed) != fmt.Sprint(names) {
			t.Errorf("listed are %v", listed)
		}
		for _, name := range names {
			if _, err := c.Trail(limited(t), &leadlinev1.TrailRequest{Vehicle: name}); err != nil {
				t.Errorf("the trail of %s: %v", name, err)
			}
		}
		ctx, cancel := context.WithCancel(limited(t))
		defer cancel()
		f, err := c.Follow(ctx, &leadlinev1.FollowRequest{})
		if err != nil {
			t.Fatal(err)
		}
		told := map[string]bool{}
		token := ""
		for len(told) < vehicles {
			m, err := f.Recv()
			if err != nil {
				t.Fatalf("told of %v: %v", told, err)
			}
			told[m.GetVehicle()], token = true, m.GetResumeToken()
		}
		if _, err := splitToken(token); err != nil {
			t.Error(err)
		}
		d, err := c.DescribeJournal(limited(t), &leadlinev1.DescribeJournalRequest{})
		if err != nil || int(d.GetOwnPartitions())*len(of) != int(d.GetPartitions()) || len(d.GetOtherServers()) != len(of)-1 {
			t.Errorf("the journal is %v, %v", d, err)
		}
	}
}

// sharing is a server that shares a journal.
func sharing(t *testing.T) Config {
	o := atBroker(t)
	o.Shared, o.Partitions = true, 4
	return Config{Journal: o, Share: &Share{Address: "127.0.0.1:1", Dial: func(a string) (*grpc.ClientConn, error) { return client.Dial(a) }, OpenMap: openSea}}
}

// ofAnother is a vehicle that another server serves, where nobody answers.
func ofAnother(t *testing.T, s *Server) string {
	t.Helper()
	for end := time.Now().Add(time.Minute); s.joined() == nil; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the server does not join")
		}
	}
	js, err := jetstream.New(s.shared.conn)
	if err != nil {
		t.Fatal(err)
	}
	other, err := share.Join(limited(t), share.Options{
		JetStream: js, Partitions: s.journal.Partitions(), Self: share.Server{ID: "another", Address: "127.0.0.1:1"}, Log: slog.New(slog.DiscardHandler),
		Take: func(context.Context, int) error { return nil }, Give: func(context.Context, int) {}, Drop: func(int) {},
	})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { other.Leave(limited(t)) })
	for end := time.Now().Add(time.Minute); ; time.Sleep(10 * time.Millisecond) {
		for i := range 100 {
			vehicle := fmt.Sprint("v", i)
			if at := s.joined().Where(s.journal.Partition(vehicle)); at.Server != nil {
				return vehicle
			}
		}
		if time.Now().After(end) {
			t.Fatal("the other server gets nothing")
		}
	}
}
