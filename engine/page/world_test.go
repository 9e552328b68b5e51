package page_test

import (
	"cmp"
	"context"
	"net"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/page"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/server"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	"leadline/network"
	"leadline/network/roadfile"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

// world is the demonstration's invented ground, a town and a bay, and what
// moves there.
type world struct {
	maps       []server.Map
	suites     map[string]*sensor.Suite
	van, craft *drivefile.Drive
}

// invented makes the world once for all tests.
var invented = sync.OnceValues(func() (*world, error) {
	w := &world{suites: map[string]*sensor.Suite{}}
	list := scenes.Invented()
	town, err := compile(list[0].Map)
	if err != nil {
		return nil, err
	}
	roads := town.(*network.Map)
	if w.van, err = list[0].Drive(1, roads, nil); err != nil {
		return nil, err
	}
	bay, err := compile(list[1].Map)
	if err != nil {
		return nil, err
	}
	heights := bay.(*terrain.Raster)
	if w.craft, err = list[1].Drive(1, nil, heights); err != nil {
		return nil, err
	}
	suite, err := sensor.ParseSuite(list[1].SuiteName, list[1].Suite)
	if err != nil {
		return nil, err
	}
	w.suites[list[1].SuiteName] = suite
	for _, name := range []string{"survey-craft", "truck"} {
		text, _ := sensor.StarterText(name)
		if w.suites[name], err = sensor.ParseSuite(name, text); err != nil {
			return nil, err
		}
	}
	east, north := heights.StepM()
	w.maps = []server.Map{
		{
			Name: list[0].Map.Name, Space: roads, Names: roads, Roads: roads, Check: func() string { return network.Check(roads).String() },
			About: server.MapAbout{Source: "INVENTED", Licence: "none", SouthWest: geo.FromDegrees(-30.02, 44.99), NorthEast: geo.FromDegrees(-29.98, 45.01)},
		},
		{
			Name: list[1].Map.Name, Space: plane.Over(heights, heights.Fingerprint(), min(east, north)),
			About: server.MapAbout{
				Source: "INVENTED", Licence: "none", VerticalDatum: "invented", Columns: heights.Grid().Cols, Rows: heights.Grid().Rows, SpacingM: min(east, north),
				SouthWest: geo.FromDegrees(-30.05, 45), NorthEast: geo.FromDegrees(-29.95, 45.05),
			},
		},
		{Name: "open-sea", Space: plane.Open(geo.FromDegrees(-30, 45), 20e3, 20), About: server.MapAbout{SouthWest: geo.FromDegrees(-30.2, 44.8), NorthEast: geo.FromDegrees(-29.8, 45.2)}},
	}
	return w, nil
})

// compile reads a scene's map as `leadline map` does.
func compile(m scenes.Map) (any, error) {
	data, err := m.Data(1)
	if err != nil {
		return nil, err
	}
	dir, err := os.MkdirTemp("", "leadline-page-")
	if err != nil {
		return nil, err
	}
	defer os.RemoveAll(dir)
	path := filepath.Join(dir, m.File)
	if err := os.WriteFile(path, data, 0o644); err != nil {
		return nil, err
	}
	if m.Kind == "roads" {
		roads, _, err := roadfile.Read(path, roadfile.Options{})
		return roads, err
	}
	arg := func(name string) string { return m.Args[slices.Index(m.Args, name)+1] }
	crs, err := terrain.ParseCRS(arg("--crs"))
	if err != nil {
		return nil, err
	}
	sigma, err := strconv.ParseFloat(arg("--sigma"), 64)
	if err != nil {
		return nil, err
	}
	res, err := heightfile.Read(path, heightfile.Options{CRS: crs, Vertical: heightfile.Vertical(arg("--vertical")), SigmaM: sigma})
	if err != nil {
		return nil, err
	}
	return res.Raster, nil
}

// running is a server with the page.
type running struct {
	t       *testing.T
	address string
	origin  string
	conn    *grpc.ClientConn
	calls   leadlinev1.PositionServiceClient
	stop    func()            // at once, streams are cut off
	shown   map[string]string // tokens by vehicle, where the server asks who feeds one
	drive   string            // what a drive is called that is opened
}

// as is a context whose calls show a token.
func (r *running) as(token string) context.Context {
	if token == "" {
		return r.t.Context()
	}
	return metadata.AppendToOutgoingContext(r.t.Context(), "authorization", "Bearer "+token)
}

// serve starts a server on an address until the test ends.
func serve(t *testing.T, address string, change ...func(*server.Config)) *running {
	t.Helper()
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	cfg := server.Config{Maps: w.maps, Suites: w.suites, Page: page.Handler(), MaxCells: 20_000, Version: "test"}
	for _, c := range change {
		c(&cfg)
	}
	s, err := server.New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	l, err := net.Listen("tcp", address)
	if err != nil {
		t.Fatal(err)
	}
	served := make(chan error, 1)
	go func() { served <- s.Serve(l) }()
	r := &running{t: t, address: l.Addr().String(), origin: "http://" + l.Addr().String()}
	if r.conn, err = client.Dial(r.address); err != nil {
		t.Fatal(err)
	}
	r.calls = leadlinev1.NewPositionServiceClient(r.conn)
	r.stop = sync.OnceFunc(func() {
		r.conn.Close()
		now, cancel := context.WithCancel(context.Background())
		cancel()
		_ = s.Shutdown(now)
		if err := <-served; err != nil {
			t.Errorf("serve: %v", err)
		}
	})
	t.Cleanup(r.stop)
	return r
}

// open opens a drive.
func (r *running) open(d *drivefile.Drive, as string, start *wire.Start) *client.Feed {
	r.t.Helper()
	h := d.Header
	h.Vehicle = as
	if start != nil {
		h.Start = *start
	}
	f, err := client.Open(r.as(r.shown[as]), r.conn, client.Drive{Header: wire.FromHeader(h), Name: cmp.Or(r.drive, "drive"), Batch: 20})
	if err != nil {
		r.t.Fatal(err)
	}
	return f
}

// upTo are a drive's measurements of its first seconds.
func upTo(d *drivefile.Drive, seconds float64) []sensor.Event {
	i := slices.IndexFunc(d.Events, func(ev sensor.Event) bool { return ev.Time > d.Time+sensor.Time(seconds*1e9) })
	return d.Events[:i]
}

// send sends measurements and waits until they are in.
func (r *running) send(f *client.Feed, evs []sensor.Event) {
	r.t.Helper()
	for _, ev := range evs {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			r.t.Fatal(err)
		}
	}
	if err := f.Flush(); err != nil {
		r.t.Fatal(err)
	}
}

// where asks for a vehicle until its posterior has so many measurements.
func (r *running) where(req *leadlinev1.WhereRequest, accepted int) *leadlinev1.Posterior {
	r.t.Helper()
	for end := time.Now().Add(patience); ; time.Sleep(10 * time.Millisecond) {
		resp, err := r.calls.Where(r.t.Context(), req)
		if err != nil {
			r.t.Fatal(err)
		}
		p := resp.GetAnswers()[0].GetPosterior()
		if p != nil && p.GetCounts().GetAccepted() >= uint64(accepted) {
			return p
		}
		if time.Now().After(end) {
			r.t.Fatalf("%v: %v", req.GetVehicles(), resp.GetAnswers()[0])
		}
	}
}

// recent waits until one of a vehicle's last measurements, as the server has them, is as it is
// wanted.
func (r *running) recent(vehicle string, wanted func(*leadlinev1.RecentMeasurement) bool) *leadlinev1.RecentMeasurement {
	r.t.Helper()
	ctx, cancel := context.WithTimeout(r.t.Context(), patience)
	defer cancel()
	st, err := r.calls.Follow(ctx, &leadlinev1.FollowRequest{Vehicles: []string{vehicle}, Detail: leadlinev1.Detail_DETAIL_BELIEF})
	if err != nil {
		r.t.Fatal(err)
	}
	var last []*leadlinev1.RecentMeasurement
	for {
		m, err := st.Recv()
		if err != nil {
			r.t.Fatalf("%s has no such measurement: %v, %v", vehicle, err, last)
		}
		last = m.GetRecent()
		for _, got := range m.GetRecent() {
			if wanted(got) {
				return got
			}
		}
	}
}

// saidBy is whether a measurement is a sighting of somebody.
func saidBy(who string) func(*leadlinev1.RecentMeasurement) bool {
	return func(m *leadlinev1.RecentMeasurement) bool {
		return m.GetMeasurement().GetMeasurement().GetSighting().GetWho() == who
	}
}

// nearStart is a start that is known to some metres.
func nearStart(d *drivefile.Drive) *wire.Start {
	return &wire.Start{Point: d.Truths[0].Position, SigmaM: 15}
}

// stream goes on sending a drive, a second of it each 100 ms, until the test
// ends.
func (r *running) stream(f *client.Feed, evs []sensor.Event) {
	ctx, cancel := context.WithCancel(context.Background())
	var wg sync.WaitGroup
	wg.Go(func() {
		var until sensor.Time
		for _, ev := range evs {
			if ev.Time > until {
				until = ev.Time + 1e9/2
				if f.Flush() != nil {
					return
				}
				select {
				case <-ctx.Done():
					return
				case <-time.After(50 * time.Millisecond):
				}
			}
			if f.Send(wire.FromEvent(ev)) != nil {
				return
			}
		}
	})
	r.t.Cleanup(func() {
		cancel()
		f.Abort()
		wg.Wait()
	})
}
