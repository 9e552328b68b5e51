package server

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"runtime"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	_ "google.golang.org/grpc/encoding/gzip" // so that the server unpacks what is sent to it
	"google.golang.org/grpc/status"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// attack is what a malicious client does. It returns an error if the server let
// it do more than it should.
type attack struct {
	name string
	do   func(ctx context.Context, address string, conn *grpc.ClientConn) error
}

var attacks = []attack{
	{"batches without end, and no receipt read", endlessBatches},
	{"streams that never open a drive", halfOpenStreams},
	{"connections that say nothing or too little", halfOpenConnections},
	{"drives opened by the hundred", manyHellos},
	{"huge strings", hugeStrings},
	{"packed zeros", packedZeros},
	{"nested and long JSON", jsonBombs},
	{"followers that do not read", slowReaders},
}

// TestMaliciousClients has all of them at once against one server, while a
// vehicle drives and is asked for: it loses nothing, every question about it is
// answered, the memory stays within bounds, nothing panics, and once the clients
// are gone no goroutine is left. What odd values of single fields do, not a number
// among them, TestFields tries one by one.
func TestMaliciousClients(t *testing.T) {
	if testing.Short() {
		t.Skip("unpacks and parses a lot: not with -short")
	}
	log := &logged{}
	_, conn := serve(t, Config{NewSession: newTally, Log: slog.New(slog.NewTextHandler(log, nil)), Limits: Limits{Vehicles: 100, Streams: 200, Followers: 20, OpenTimeout: time.Second}})
	runtime.GC()
	var before runtime.MemStats
	runtime.ReadMemStats(&before)
	var most atomic.Uint64
	over := make(chan struct{})
	var watch sync.WaitGroup
	watch.Go(func() {
		for tick := time.Tick(20 * time.Millisecond); ; {
			select {
			case <-over:
				return
			case <-tick:
				var now runtime.MemStats
				runtime.ReadMemStats(&now)
				most.Store(max(most.Load(), now.HeapInuse))
			}
		}
	})
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("good"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	beside := newTimed(t, conn, "timed")
	alone := beside.times(func(n int) bool { return n < 300 })
	var raging atomic.Int64
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	var hostile sync.WaitGroup
	for _, a := range attacks {
		raging.Add(1)
		hostile.Go(func() {
			defer raging.Add(-1)
			c, err := client.Dial(conn.Target())
			if err != nil {
				t.Error(err)
				return
			}
			defer c.Close()
			if err := a.do(ctx, conn.Target(), c); err != nil {
				t.Errorf("%s: %v", a.name, err)
			}
		})
	}
	var among []time.Duration
	hostile.Go(func() { among = beside.times(func(int) bool { return raging.Load() > 0 }) })
	evs := voyage(4, 200)
	for i, ev := range evs {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
		if i%20 == 19 {
			if _, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"good"}}); err != nil && status.Code(err) != codes.FailedPrecondition {
				t.Errorf("asked for the vehicle after %d measurements: %v", i+1, err)
			}
			time.Sleep(20 * time.Millisecond)
		}
	}
	hostile.Wait()
	closed, err := f.Close()
	if err != nil || closed.GetPosteriorSha256() != tallied(evs) {
		t.Errorf("the vehicle beside them: %v, %v", closed, err)
	}
	close(over)
	watch.Wait()
	alone = append(alone, beside.times(func(n int) bool { return n < 300 })...)
	slices.Sort(alone)
	slices.Sort(among)
	calm, busy := alone[len(alone)/2], among[len(among)/2]
	t.Logf("a receipt takes %.3f ms (median of %d), beside malicious clients %.3f ms (of %d), %.2f times as long, at most %.0f ms", 1e3*calm.Seconds(), len(alone), 1e3*busy.Seconds(), len(among), busy.Seconds()/calm.Seconds(), 1e3*among[len(among)-1].Seconds())
	if most := among[len(among)-1]; most > 5*time.Second { // survive compares medians
		t.Errorf("a receipt took %v", most)
	}
	t.Logf("heap in use: %d MiB before, %d at most", before.HeapInuse>>20, most.Load()>>20)
	if most.Load() > before.HeapInuse+400<<20 {
		t.Errorf("the heap grew from %d to %d MiB", before.HeapInuse>>20, most.Load()>>20)
	}
	for _, line := range log.lines() {
		if strings.Contains(line, "panic") {
			t.Error(line)
		}
	}
}

// timed is a vehicle that waits for each receipt.
type timed struct {
	t  *testing.T
	st grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse]
	n  uint64
}

func newTimed(t *testing.T, conn *grpc.ClientConn, vehicle string) *timed {
	t.Helper()
	st, err := leadlinev1.NewPositionServiceClient(conn).Feed(limited(t))
	if err == nil {
		err = st.Send(opening(&leadlinev1.Open{Header: header(vehicle), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE}))
	}
	if err == nil {
		_, err = st.Recv()
	}
	if err != nil {
		t.Fatal(err)
	}
	return &timed{t: t, st: st}
}

// times is how long receipts take, one after the other and a few milliseconds apart.
func (v *timed) times(more func(n int) bool) (took []time.Duration) {
	for len(took) == 0 || more(len(took)) {
		v.n++
		ev := voyage(7, 1)[0]
		ev.Time += sensor.Time(v.n * 1e9)
		began := time.Now()
		err := v.st.Send(batch(v.n, ev))
		if err == nil {
			_, err = v.st.Recv()
		}
		if err != nil {
			v.t.Error(err)
			return append(took, time.Hour)
		}
		took = append(took, time.Since(began))
		time.Sleep(2 * time.Millisecond)
	}
	return took
}

// endlessBatches sends batches of the largest size and reads nothing: sending
// comes to a halt, since the server reads no further.
func endlessBatches(ctx context.Context, _ string, conn *grpc.ClientConn) error {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	st, err := leadlinev1.NewPositionServiceClient(conn).Feed(ctx)
	if err != nil {
		return err
	}
	_ = st.Send(opening(&leadlinev1.Open{Header: header("endless"), Drive: "d", Reply: leadlinev1.Reply_REPLY_EVERY}))
	evs := voyage(1, 860)[:1024]
	var sent atomic.Int64
	done := make(chan struct{})
	go func() {
		defer close(done)
		for n := uint64(1); st.Send(batch(n, evs...)) == nil; n++ {
			sent.Add(1)
		}
	}()
	for last, since := int64(-1), time.Now(); ; time.Sleep(20 * time.Millisecond) {
		if n := sent.Load(); n != last {
			last, since = n, time.Now()
		} else if time.Since(since) > 500*time.Millisecond {
			break
		}
		if last > 1000 {
			err = fmt.Errorf("%d batches were taken", last)
			break
		}
	}
	cancel()
	<-done
	return err
}

// halfOpenStreams opens streams and says nothing: each is ended.
func halfOpenStreams(ctx context.Context, _ string, conn *grpc.ClientConn) error {
	var streams []rawStream
	for range 150 {
		st, err := leadlinev1.NewPositionServiceClient(conn).Feed(ctx)
		if err != nil {
			return err
		}
		streams = append(streams, st)
	}
	for i, st := range streams {
		if got := saidBy(ends(st)); got.reason != leadlinev1.Reason_REASON_SILENT && got.reason != leadlinev1.Reason_REASON_SERVER_FULL {
			return fmt.Errorf("stream %d ended with %+v", i, got)
		}
	}
	return nil
}

// halfOpenConnections connect and stop at the beginning of whatever they seem to
// be.
func halfOpenConnections(ctx context.Context, address string, _ *grpc.ClientConn) error {
	var conns []net.Conn
	defer func() {
		for _, c := range conns {
			c.Close()
		}
	}()
	for i := range 120 {
		c, err := new(net.Dialer).DialContext(ctx, "tcp", address)
		if err != nil {
			return err
		}
		conns = append(conns, c)
		begin := []string{
			"", "P", "PRI * HTTP/2.0\r\n\r\nSM\r\n\r\n", "PRI * HTTP/2.0\r\n\r\nSM\r\n\r\n\xff\xff\xff\x00\x00\x00\x00\x00\x00", "\x16\x03\x01\x02\x00\x01",
			"POST /leadline.v1.PositionService/Where HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\nContent-Length: 4000000\r\n\r\n{",
			"GET /" + strings.Repeat("a", 10_000),
		}[i%7]
		if _, err := io.WriteString(c, begin); err != nil {
			return err
		}
	}
	time.Sleep(300 * time.Millisecond)
	return nil
}

// manyHellos opens more drives than there may be and leaves them open.
func manyHellos(ctx context.Context, _ string, conn *grpc.ClientConn) error {
	full := 0
	for i := range 400 {
		limit, err := leftOpen(ctx, conn, fmt.Sprint("hello ", i))
		if err != nil {
			return err
		}
		if limit != "" {
			full++
		}
	}
	if full < 300 {
		return fmt.Errorf("of 400 drives %d were refused", full)
	}
	return nil
}

// hugeStrings puts as much into a name as a message holds, and more.
func hugeStrings(ctx context.Context, _ string, conn *grpc.ClientConn) error {
	api := leadlinev1.NewPositionServiceClient(conn)
	for _, size := range []int{300, 3 << 20, 5 << 20} {
		long := strings.Repeat("é", size/2)
		st, err := api.Feed(ctx)
		if err != nil {
			return err
		}
		h := header(long)
		_ = st.Send(opening(&leadlinev1.Open{Header: h, Drive: long}))
		_, opened := st.Recv()
		_, where := api.Where(ctx, &leadlinev1.WhereRequest{Vehicles: []string{long, long[:4]}})
		_, listed := api.ListVehicles(ctx, &leadlinev1.ListVehiclesRequest{Map: long, PageToken: long})
		for _, err := range []error{opened, where, listed} {
			got := saidBy(err)
			if err == nil && size < 4<<20 {
				continue // where answers for each name
			}
			if got.code != codes.InvalidArgument && got.code != codes.ResourceExhausted && got.code != codes.NotFound || len(got.message) > 1100 {
				return fmt.Errorf("%d bytes: %v, a message of %d bytes", size, got.code, len(got.message))
			}
		}
	}
	return nil
}

// zeros is a GiB of zeros, packed into a MiB.
func zeros() []byte {
	var one bytes.Buffer
	z := gzip.NewWriter(&one)
	_, _ = z.Write(make([]byte, 16<<20))
	_ = z.Close()
	return bytes.Repeat(one.Bytes(), 64)
}

// packedZeros sends what is small and unpacks to what is not, by gRPC and by HTTP.
func packedZeros(ctx context.Context, address string, _ *grpc.ClientConn) error {
	bomb := zeros()
	frame := binary.BigEndian.AppendUint32([]byte{1}, uint32(len(bomb)))
	for _, c := range []struct {
		protocol, content, encoding string
		body                        []byte
	}{
		{"h2c", "application/grpc", "Grpc-Encoding", append(frame, bomb...)},
		{"http/1.1", "application/json", "Content-Encoding", bomb},
		{"http/1.1", "application/proto", "Content-Encoding", bomb},
		{"http/1.1", "application/grpc-web+proto", "Grpc-Encoding", append(frame, bomb...)},
		{"http/1.1", "application/connect+json", "Connect-Content-Encoding", append(frame, bomb...)},
	} {
		var p http.Protocols
		p.SetHTTP1(c.protocol != "h2c")
		p.SetUnencryptedHTTP2(c.protocol == "h2c")
		method := "Where"
		if strings.HasPrefix(c.content, "application/connect") {
			method = "Follow"
		}
		req, err := http.NewRequestWithContext(ctx, http.MethodPost, "http://"+address+"/leadline.v1.PositionService/"+method, bytes.NewReader(c.body))
		if err != nil {
			return err
		}
		req.Header.Set("Content-Type", c.content)
		req.Header.Set(c.encoding, "gzip")
		req.Header.Set("Te", "trailers")
		tr := &http.Transport{Protocols: &p, DisableKeepAlives: true}
		r, err := (&http.Client{Transport: tr}).Do(req)
		if err != nil {
			return fmt.Errorf("%s: %w", c.content, err)
		}
		text, _ := io.ReadAll(io.LimitReader(r.Body, 1<<20))
		r.Body.Close()
		tr.CloseIdleConnections()
		if len(text) > 5 && text[0] == 3 { // Connect's end of a stream, packed
			if z, err := gzip.NewReader(bytes.NewReader(text[5:])); err == nil {
				text, _ = io.ReadAll(z)
			}
		}
		refused := r.StatusCode != http.StatusOK || r.Header.Get("Grpc-Status") != "" || r.Trailer.Get("Grpc-Status") == fmt.Sprint(int(codes.ResourceExhausted)) || bytes.Contains(text, []byte("resource_exhausted")) ||
			bytes.Contains(text, []byte("grpc-status: 8"))
		if !refused {
			return fmt.Errorf("%s: it was taken: %v, %v, %.100q", c.content, r.Status, r.Trailer, text)
		}
	}
	return nil
}

// jsonBombs sends JSON that is deep, long, or nothing but keys.
func jsonBombs(ctx context.Context, address string, _ *grpc.ClientConn) error {
	c := byHTTP()
	for i, body := range []string{
		strings.Repeat(`{"vehicles":`, 300_000), strings.Repeat("[", 4_000_000), `{"vehicles":` + strings.Repeat("[", 1_000_000) + strings.Repeat("]", 1_000_000) + "}",
		`{"integrity_risk": 1` + strings.Repeat("0", 1_000_000) + "}", `{"integrity_risk": 1e999999999}`, `{"integrity_risk": "NaN", "vehicles": ["good"]}`,
		"{" + strings.TrimSuffix(strings.Repeat(`"vehicles":[],`, 250_000), ",") + "}", `{"vehicles":["` + strings.Repeat(`\u0000`, 600_000) + `"]}`,
		strings.Repeat(" ", 4_100_000) + "{}", strings.Repeat(" ", 5_000_000) + "{}",
	} {
		req, err := http.NewRequestWithContext(ctx, http.MethodPost, "http://"+address+"/leadline.v1.PositionService/Where", strings.NewReader(body))
		if err != nil {
			return err
		}
		req.Header.Set("Content-Type", "application/json")
		r, err := c.Do(req)
		if err != nil {
			return fmt.Errorf("body %d: %w", i, err)
		}
		text, _ := io.ReadAll(io.LimitReader(r.Body, 1<<20))
		r.Body.Close()
		if r.StatusCode < 400 || r.StatusCode >= 500 || len(text) > 10_000 {
			return fmt.Errorf("body %d is answered with %s and %d bytes", i, r.Status, len(text))
		}
	}
	return nil
}

// slowReaders follow all vehicles and read nothing.
func slowReaders(ctx context.Context, address string, conn *grpc.ClientConn) error {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	for range 15 {
		if _, err := leadlinev1.NewPositionServiceClient(conn).Follow(ctx, &leadlinev1.FollowRequest{}); err != nil {
			return err
		}
	}
	frame := binary.BigEndian.AppendUint32([]byte{0}, 2)
	for range 5 {
		c, err := new(net.Dialer).DialContext(ctx, "tcp", address)
		if err != nil {
			return err
		}
		defer c.Close()
		fmt.Fprintf(c, "POST /leadline.v1.PositionService/Follow HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/connect+json\r\nContent-Length: 7\r\n\r\n%s{}", frame)
		if line, err := bufio.NewReaderSize(c, 16).ReadString('\n'); err != nil || !strings.Contains(line, "200") {
			return errors.Join(err, fmt.Errorf("a follower by HTTP is answered with %q", line))
		}
	}
	time.Sleep(500 * time.Millisecond)
	return nil
}
