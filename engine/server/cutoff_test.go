package server

import (
	"fmt"
	"io"
	"net"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// cable is a way to a server that can be pulled: connections last then, new ones come
// about, and nothing that is sent over any of them arrives.
type cable struct {
	address string
	pulled  atomic.Bool
}

func newCable(t *testing.T, to string) *cable {
	t.Helper()
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	c := &cable{address: ln.Addr().String()}
	var mu sync.Mutex
	var conns []net.Conn
	var all sync.WaitGroup
	keep := func(c net.Conn) {
		mu.Lock()
		defer mu.Unlock()
		conns = append(conns, c)
	}
	t.Cleanup(func() {
		ln.Close()
		mu.Lock()
		for _, c := range conns {
			c.Close()
		}
		mu.Unlock()
		all.Wait()
	})
	all.Go(func() {
		for {
			near, err := ln.Accept()
			if err != nil {
				return
			}
			keep(near)
			far, err := net.Dial("tcp", to)
			if err != nil {
				near.Close()
				continue
			}
			keep(far)
			all.Go(func() { c.pass(far, near) })
			all.Go(func() { c.pass(near, far) })
		}
	})
	return c
}

// pass carries bytes until one side ends; what was begun while the cable was pulled
// never arrives, nor does what comes after it over the same connection.
func (c *cable) pass(to, from net.Conn) {
	defer to.Close()
	defer from.Close()
	torn := false
	buf := make([]byte, 32<<10)
	for {
		n, err := from.Read(buf)
		if torn = torn || c.pulled.Load(); torn {
			to = nopConn{to}
		}
		if _, werr := to.Write(buf[:n]); err != nil || werr != nil {
			return
		}
	}
}

type nopConn struct{ net.Conn }

func (nopConn) Write(b []byte) (int, error) { return io.Discard.Write(b) }

// TestCutOff pulls the cable between one of two servers and the broker, which ends no
// connection: the server says so to those who call it and to those whose streams it
// has, vehicles that know both go on at the other one within seconds and to the same
// posteriors, and when the cable is put back it has its part again.
func TestCutOff(t *testing.T) {
	if testing.Short() {
		t.Skip("waits for leases: not with -short")
	}
	o := atBroker(t)
	o.Shared, o.Partitions = true, 4
	way := newCable(t, strings.TrimPrefix(o.Broker.URL, "nats://"))
	mine := *o
	mine.Broker.URL = "nats://" + way.address
	a, b := among(t, &mine), among(t, o)
	balanced(t, o.Partitions, a, b)
	const vehicles = 8
	evs := voyage(5, 60)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	pulled := make(chan struct{})
	var atHalf, fleet sync.WaitGroup
	var longest atomic.Int64
	for v := range vehicles {
		atHalf.Add(1)
		fleet.Go(func() {
			var half sync.Once
			defer half.Do(atHalf.Done)
			conn, err := client.Dial(a.addr + "," + b.addr)
			if err != nil {
				t.Error(err)
				return
			}
			defer conn.Close()
			c, err := client.Carry(limited(t), conn, client.Drive{Header: header(fmt.Sprint("v", v)), Name: "d", Batch: 1, Window: 1})
			if err != nil {
				t.Error(err)
				return
			}
			defer c.Abort()
			for i, ev := range evs {
				if i == len(evs)/2 {
					half.Do(atHalf.Done)
					<-pulled
				}
				began := time.Now()
				if err := c.Send(wire.FromEvent(ev)); err != nil {
					t.Error(err)
					return
				}
				took := int64(time.Since(began))
				for was := longest.Load(); took > was && !longest.CompareAndSwap(was, took); was = longest.Load() {
				}
			}
			closed, err := c.Close()
			if err != nil {
				t.Error(err)
				return
			}
			if closed.GetAccepted() != uint64(len(evs)) || closed.GetPosteriorSha256() != want {
				t.Errorf("v%d: %d accepted of %d, the same posteriors: %v", v, closed.GetAccepted(), len(evs), closed.GetPosteriorSha256() == want)
			}
		})
	}
	atHalf.Wait()
	alone, err := client.Dial(a.addr)
	if err != nil {
		t.Fatal(err)
	}
	defer alone.Close()
	st, err := leadlinev1.NewPositionServiceClient(alone).Feed(limited(t))
	if err == nil {
		err = st.Send(opening(&leadlinev1.Open{Header: header("stays"), Drive: "d"}))
	}
	if err == nil {
		_, err = st.Recv()
	}
	if err != nil {
		t.Fatal(err)
	}
	way.pulled.Store(true)
	close(pulled)
	// How long all of it takes, a row of "make survive" holds against its limit: here
	// other tests are at work. The stream that is open ends, and says why.
	began := time.Now()
	if err := ends(st); !isCutOff(err) {
		t.Errorf("a stream of a server that is cut off ends with %v", err)
	}
	t.Logf("its streams lasted for %v", time.Since(began))
	if err := a.s.shared.ready(); err == nil {
		t.Error("a server that is cut off says that it is ready")
	}
	fleet.Wait()
	t.Logf("the longest wait of a vehicle was %v", time.Duration(longest.Load()))
	// Who calls it alone hears where not to; where the other one is too busy to renew its
	// lease, the broker is away for all for a moment, and that is no cut.
	called := func(vehicle string, good func(error) bool) {
		t.Helper()
		err := openedAt(t, alone, vehicle)
		for until := time.Now().Add(20 * time.Second); !good(err) && time.Now().Before(until); time.Sleep(50 * time.Millisecond) {
			err = openedAt(t, alone, vehicle)
		}
		if !good(err) {
			t.Errorf("called for %s the server says %v", vehicle, err)
		}
	}
	called("v0", isCutOff)
	way.pulled.Store(false)
	balanced(t, o.Partitions, a, b)
	for v := range vehicles {
		called(fmt.Sprint("later ", v), func(err error) bool { return err == nil })
	}
	a.stop(limited(t))
	b.stop(limited(t))
}

// openedAt opens a drive at a server and leaves it.
func openedAt(t *testing.T, conn *grpc.ClientConn, vehicle string) error {
	t.Helper()
	f, err := client.Open(limited(t), conn, client.Drive{Header: header(vehicle), Name: "e", Replace: true})
	if err == nil {
		f.Abort()
	}
	return err
}

// isCutOff reports whether an error says that the server is cut off.
func isCutOff(err error) bool {
	why, ours := client.WhyOf(err)
	return ours && why.Reason == leadlinev1.Reason_REASON_RECOVERING && why.About["server"] == "cut off"
}

// TestBrokerAway has nobody reach the broker for longer than a lease: vehicles keep
// their streams, also those that go through another server, and go on once it is back.
func TestBrokerAway(t *testing.T) {
	if testing.Short() {
		t.Skip("waits for leases: not with -short")
	}
	o := atBroker(t)
	o.Shared, o.Partitions = true, 4
	way := newCable(t, strings.TrimPrefix(o.Broker.URL, "nats://"))
	o.Broker.URL = "nats://" + way.address
	a, b := among(t, o), among(t, o)
	balanced(t, o.Partitions, a, b)
	const vehicles = 6
	evs := voyage(6, 20)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	var cars [vehicles]*client.Carrier
	for v := range cars {
		conn, err := client.Dial([]string{a.addr, b.addr}[v%2])
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		cars[v], err = client.Carry(limited(t), conn, client.Drive{Header: header(fmt.Sprint("v", v)), Name: "d", Batch: 1, OnLost: func(err error) { t.Errorf("v%d loses its stream: %v", v, err) }})
		if err != nil {
			t.Fatal(err)
		}
	}
	for i, ev := range evs {
		if i == 10 {
			way.pulled.Store(true)
			time.Sleep(a.cfg.Share.Lease + cutAfter + 2*time.Second)
			if a.s.joined().Fresh() || b.s.joined().Fresh() {
				t.Error("a lease holds without a broker")
			}
			way.pulled.Store(false)
		}
		for _, c := range cars {
			if err := c.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
	}
	for v, c := range cars {
		closed, err := c.Close()
		if err != nil || closed.GetPosteriorSha256() != want {
			t.Errorf("v%d: %v, %v", v, closed, err)
		}
	}
	a.stop(limited(t))
	b.stop(limited(t))
}
