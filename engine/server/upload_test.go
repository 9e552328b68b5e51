package server

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"

	"leadline/engine/client"
	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
	leadlinev1 "leadline/proto/leadline/v1"
)

// shelf opens invented maps, of files that say "plane NAME", "roads NAME",
// "damaged" or "panic", and counts those that are open.
type shelf struct{ open atomic.Int64 }

// namedPlane is a space with a fingerprint of its own.
type namedPlane struct {
	filter.PlaneSpace
	fingerprint string
}

func (p namedPlane) Fingerprint() string { return p.fingerprint }

func (s *shelf) Open(path string) (Map, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return Map{}, err
	}
	kind, fingerprint, _ := strings.Cut(string(b), " ")
	m := Map{Close: func() error { s.open.Add(-1); return nil }, About: MapAbout{Source: "invented"}}
	switch kind {
	case "plane":
		m.Space = namedPlane{plane.Open(middle, 20e3, 20), fingerprint}
	case "roads":
		m.Space = filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 100}}}}, [][]filtertest.Link{nil})
	case "panic":
		panic("a defect")
	default:
		return Map{}, fmt.Errorf("%s: it is damaged", path)
	}
	s.open.Add(1)
	return m, nil
}

func (s *shelf) uploads(folder string) *Uploads {
	return &Uploads{Folder: folder, Open: s.Open, Suffixes: map[leadlinev1.MapKind]string{
		leadlinev1.MapKind_MAP_KIND_ROADS: ".roads.x", leadlinev1.MapKind_MAP_KIND_HEIGHTS: ".heights.x",
	}, MaxBytes: 1 << 20, Maps: 3}
}

// beginning announces a file of heights.
func beginning(name, content string) *leadlinev1.MapBeginning {
	sum := sha256.Sum256([]byte(content))
	return &leadlinev1.MapBeginning{Name: name, Kind: leadlinev1.MapKind_MAP_KIND_HEIGHTS, Bytes: uint64(len(content)), Sha256: hex.EncodeToString(sum[:])}
}

func chunk(s string) *leadlinev1.UploadMapRequest {
	return &leadlinev1.UploadMapRequest{Message: &leadlinev1.UploadMapRequest_Chunk{Chunk: []byte(s)}}
}

func begins(b *leadlinev1.MapBeginning) *leadlinev1.UploadMapRequest {
	return &leadlinev1.UploadMapRequest{Message: &leadlinev1.UploadMapRequest_Beginning{Beginning: b}}
}

// send sends the messages of an upload.
func send(ctx context.Context, conn *grpc.ClientConn, ms ...*leadlinev1.UploadMapRequest) (*leadlinev1.MapDescription, error) {
	st, err := leadlinev1.NewPositionServiceClient(conn).UploadMap(ctx)
	if err != nil {
		return nil, err
	}
	for _, m := range ms {
		if err := st.Send(m); err != nil {
			break // CloseAndRecv says why
		}
	}
	r, err := st.CloseAndRecv()
	return r.GetMap(), err
}

// put uploads a content in two chunks.
func put(ctx context.Context, conn *grpc.ClientConn, b *leadlinev1.MapBeginning, content string) (*leadlinev1.MapDescription, error) {
	half := len(content) / 2
	return send(ctx, conn, begins(b), chunk(content[:half]), chunk(content[half:]))
}

// files lists a folder.
func files(t *testing.T, folder string) (names []string) {
	t.Helper()
	es, err := os.ReadDir(folder)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range es {
		names = append(names, e.Name())
	}
	return names
}

// TestUpload proves that a map that is uploaded can be driven on at once and
// after the server was started again; that one that is replaced stays open for
// the drives that are on it, which are told, and is closed with the last; and
// that a configured map can be replaced, too.
func TestUpload(t *testing.T) {
	folder := t.TempDir()
	var s shelf
	configured := sea()
	var closed atomic.Bool
	configured.Close = func() error { closed.Store(true); return nil }
	_, conn := serve(t, Config{MaxCells: 1000, Maps: []Map{configured}, Uploads: s.uploads(folder)})
	ask := leadlinev1.NewPositionServiceClient(conn)
	ctx := limited(t)
	on := func(vehicle, name string) *leadlinev1.DriveHeader {
		h := header(vehicle)
		h.Map = name
		return h
	}
	first, err := put(ctx, conn, beginning("bay", "plane one"), "plane one")
	if err != nil || first.GetName() != "bay" || first.GetFingerprint() != "one" || first.GetKind() != leadlinev1.MapKind_MAP_KIND_HEIGHTS || first.GetSource() != "invented" || first.GetFrame() == "" {
		t.Fatalf("uploaded: %v, %v", first, err)
	}
	evs := voyage(1, 4)
	st, o := openRaw(t, conn, &leadlinev1.Open{Header: on("old", "bay"), Drive: "d"})
	if o.GetMapFingerprint() != "one" {
		t.Errorf("opened on %q", o.GetMapFingerprint())
	}
	if err := st.Send(batch(1, evs[:2]...)); err != nil {
		t.Fatal(err)
	}
	b := beginning("bay", "plane two")
	_, err = put(ctx, conn, b, "plane two")
	wantStatus(t, "a second one", err, codes.AlreadyExists, `there is a map "bay" here`)
	b.Replace = true
	second, err := put(ctx, conn, b, "plane two")
	if err != nil || second.GetFingerprint() != "two" || second.GetSessions() != 0 || second.GetOlderSessions() != 1 {
		t.Errorf("replaced: %v, %v", second, err)
	}
	if n := s.open.Load(); n != 2 {
		t.Errorf("%d maps are open while a drive is on the old one, want 2", n)
	}
	// The drive goes on, and is told; another is on the new one.
	if err := st.Send(batch(2, evs[2:]...)); err != nil {
		t.Fatal(err)
	}
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	var word *leadlinev1.Closed
	for word == nil {
		m, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		word = m.GetClosed()
	}
	if p := word.GetPosterior(); p.GetNewerMapFingerprint() != "two" || p.GetMapFingerprint() != "one" || word.GetAccepted() != uint64(len(evs)) {
		t.Errorf("closed %v", word)
	}
	if c, err := fed(ctx, conn, client.Drive{Header: on("new", "bay")}, evs); err != nil || c.GetPosterior().GetMapFingerprint() != "two" || c.GetPosterior().GetNewerMapFingerprint() != "" {
		t.Errorf("a new drive: %v, %v", c, err)
	}
	l, err := ask.ListVehicles(ctx, &leadlinev1.ListVehiclesRequest{})
	if err != nil || l.GetVehicles()[1].GetNewerMapFingerprint() != "two" || l.GetVehicles()[0].GetNewerMapFingerprint() != "" {
		t.Errorf("listed %v, %v", l, err)
	}
	// The last drive on the old one makes way: it is closed.
	if _, err := fed(ctx, conn, client.Drive{Header: on("old", "sea")}, evs); err != nil {
		t.Fatal(err)
	}
	for wait := time.Now(); s.open.Load() != 1; time.Sleep(time.Millisecond) {
		if time.Since(wait) > 10*time.Second {
			t.Fatalf("%d maps are open, want 1", s.open.Load())
		}
	}
	d, err := ask.DescribeMap(ctx, &leadlinev1.DescribeMapRequest{Map: "bay"})
	if err != nil || d.GetMap().GetSessions() != 1 || d.GetMap().GetOlderSessions() != 0 {
		t.Errorf("described: %v, %v", d, err)
	}
	// A configured one is replaced; nobody was left on it but "old".
	b = beginning("sea", "plane three")
	b.Replace = true
	if _, err := put(ctx, conn, b, "plane three"); err != nil || closed.Load() {
		t.Errorf("the sea is replaced: %v; closed %v under its drive", err, closed.Load())
	}
	if got := files(t, folder); !slices.Equal(got, []string{"bay.heights.x", "sea.heights.x"}) {
		t.Errorf("the folder holds %q", got)
	}
	ms, err := ask.ListMaps(ctx, &leadlinev1.ListMapsRequest{})
	if err != nil || len(ms.GetMaps()) != 2 || ms.GetMaps()[1].GetFingerprint() != "three" || ms.GetMaps()[1].GetOlderSessions() != 1 {
		t.Errorf("listed: %v, %v", ms, err)
	}

	// Another server finds them, and clears away what was left unfinished or is
	// no map.
	for name, content := range map[string]string{part + "1.heights.x": "pla", "torn.heights.x": "damaged", "notes.txt": "", "hard.roads.x": "panic", "bay.roads.x": "roads r"} {
		if err := os.WriteFile(filepath.Join(folder, name), []byte(content), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	_, conn2 := serve(t, Config{MaxCells: 1000, Maps: []Map{sea()}, Uploads: s.uploads(folder)})
	ms2, err := leadlinev1.NewPositionServiceClient(conn2).ListMaps(ctx, &leadlinev1.ListMapsRequest{})
	if err != nil || len(ms2.GetMaps()) != 2 || ms2.GetMaps()[0].GetFingerprint() != "two" || ms2.GetMaps()[1].GetFingerprint() != "three" {
		t.Errorf("after another start: %v, %v", ms2, err)
	}
	if got := files(t, folder); slices.Contains(got, part+"1.heights.x") || !slices.Contains(got, "torn.heights.x") {
		t.Errorf("the folder holds %q", got)
	}
}

// TestBadUpload proves that each way to upload wrongly has its own answer, and
// leaves neither a file nor a map behind.
func TestBadUpload(t *testing.T) {
	folder := t.TempDir()
	outside := filepath.Join(filepath.Dir(folder), "outside.heights.x")
	var s shelf
	_, conn := serve(t, Config{NewSession: newTally, Uploads: s.uploads(folder), Limits: Limits{OpenTimeout: 200 * time.Millisecond}})
	const good = "plane one"
	with := func(change func(b *leadlinev1.MapBeginning)) *leadlinev1.UploadMapRequest {
		b := beginning("bay", good)
		change(b)
		return begins(b)
	}
	none := func(*leadlinev1.MapBeginning) {}
	type row struct {
		what  string
		send  []*leadlinev1.UploadMapRequest
		code  codes.Code
		words string
	}
	rows := []row{
		{"nothing", nil, codes.InvalidArgument, "the first message is not a beginning"},
		{"a chunk first", []*leadlinev1.UploadMapRequest{chunk(good)}, codes.InvalidArgument, "the first message is not a beginning"},
		{"two beginnings", []*leadlinev1.UploadMapRequest{with(none), with(none)}, codes.InvalidArgument, "without a chunk"},
		{"an empty chunk", []*leadlinev1.UploadMapRequest{with(none), chunk("")}, codes.InvalidArgument, "without a chunk"},
		{"no kind", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Kind = 0 })}, codes.InvalidArgument, "kind MAP_KIND_UNSPECIFIED"},
		{"an unknown kind", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Kind = 7 })}, codes.InvalidArgument, "kind 7"},
		{"no size", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Bytes = 0 })}, codes.InvalidArgument, "bytes is missing"},
		{"too large", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Bytes = 1<<20 + 1 })}, codes.InvalidArgument, "at most 1048576"},
		{"hugely too large", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Bytes = 1 << 63 })}, codes.InvalidArgument, "at most 1048576"},
		{"no sum", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Sha256 = "abc" })}, codes.InvalidArgument, `sha256 "abc"`},
		{"another sum", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Sha256 = strings.Repeat("0", 64) }), chunk(good)}, codes.InvalidArgument, "has the sha256"},
		{"cut short", []*leadlinev1.UploadMapRequest{with(none), chunk(good[:4])}, codes.InvalidArgument, "4 of 9 bytes came"},
		{"more than announced", []*leadlinev1.UploadMapRequest{with(none), chunk(good + "!")}, codes.InvalidArgument, "more than the 9 bytes"},
		{"a large chunk", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Bytes = 1 << 20 }), chunk(strings.Repeat("x", maxChunk+1))}, codes.InvalidArgument, "at most 1048576"},
		{"damaged", []*leadlinev1.UploadMapRequest{begins(beginning("bay", "nonsense")), chunk("nonsense")}, codes.InvalidArgument, "upload: the file: it is damaged"},
		{"a defect of the reader", []*leadlinev1.UploadMapRequest{begins(beginning("bay", "panic")), chunk("panic")}, codes.InvalidArgument, "cannot be read"},
		{"of another kind", []*leadlinev1.UploadMapRequest{begins(beginning("bay", "roads r")), chunk("roads r")}, codes.InvalidArgument, "is a map of roads"},
		{"of another kind in place of one", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) {
			b.Name, b.Replace, b.Kind = "sea", true, leadlinev1.MapKind_MAP_KIND_ROADS
		})}, codes.AlreadyExists, "is one of heights"},
		{"there is one", []*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Name = "sea" })}, codes.AlreadyExists, `there is a map "sea" here`},
	}
	for _, name := range []string{"", ".", "..", "../outside", "/etc/passwd", "a/b", `a\b`, "a\x00b", ".hidden", "-o", "bay.heights.x", "ü", strings.Repeat("x", 101), "con:", "a b", "a\n"} {
		rows = append(rows, row{
			fmt.Sprintf("the name %q", name),
			[]*leadlinev1.UploadMapRequest{with(func(b *leadlinev1.MapBeginning) { b.Name = name }), chunk(good)},
			codes.InvalidArgument, "give up to 100 letters",
		})
	}
	for _, r := range rows {
		_, err := send(limited(t), conn, r.send...)
		wantStatus(t, r.what, err, r.code, r.words)
	}
	// Silence, and a client that goes away.
	st, err := leadlinev1.NewPositionServiceClient(conn).UploadMap(limited(t))
	if err != nil {
		t.Fatal(err)
	}
	if err := st.Send(with(none)); err != nil {
		t.Fatal(err)
	}
	_, err = st.CloseAndRecv()
	wantStatus(t, "no chunk", err, codes.InvalidArgument, "0 of 9 bytes")
	st, err = leadlinev1.NewPositionServiceClient(conn).UploadMap(limited(t))
	if err != nil {
		t.Fatal(err)
	}
	if err := st.Send(with(none)); err != nil {
		t.Fatal(err)
	}
	err = st.RecvMsg(&leadlinev1.UploadMapResponse{})
	wantStatus(t, "silence", err, codes.DeadlineExceeded, "no message for 200ms")
	ctx, cancel := context.WithCancel(limited(t))
	st, err = leadlinev1.NewPositionServiceClient(conn).UploadMap(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if err := st.Send(with(none)); err != nil {
		t.Fatal(err)
	}
	cancel()
	// More maps than there may be.
	for i, name := range []string{"a", "b"} {
		content := fmt.Sprint("plane ", i)
		if _, err := put(limited(t), conn, beginning(name, content), content); err != nil {
			t.Fatal(err)
		}
	}
	_, err = put(limited(t), conn, beginning("c", good), good)
	wantStatus(t, "a fourth map", err, codes.ResourceExhausted, "its 3 maps")
	for wait := time.Now(); ; time.Sleep(time.Millisecond) {
		got := files(t, folder)
		if slices.Equal(got, []string{"a.heights.x", "b.heights.x"}) {
			break
		}
		if time.Since(wait) > 10*time.Second {
			t.Fatalf("the folder holds %q", got)
		}
	}
	if _, err := os.Stat(outside); err == nil {
		t.Error("a file was written outside the folder")
	}
	if n := s.open.Load(); n != 2 {
		t.Errorf("%d maps are open, want 2", n)
	}
}

// TestUploadsAtOnce proves that only so many uploads go on at once.
func TestUploadsAtOnce(t *testing.T) {
	var s shelf
	srv, conn := serve(t, Config{NewSession: newTally, Uploads: s.uploads(t.TempDir())})
	var waiting []uploadClient
	for _, name := range []string{"a", "b"} {
		st, err := leadlinev1.NewPositionServiceClient(conn).UploadMap(limited(t))
		if err != nil {
			t.Fatal(err)
		}
		if err := st.Send(begins(beginning(name, "plane one"))); err != nil {
			t.Fatal(err)
		}
		waiting = append(waiting, st)
	}
	for wait := time.Now(); len(srv.uploading) < 2; time.Sleep(time.Millisecond) {
		if time.Since(wait) > 10*time.Second {
			t.Fatal("the uploads do not begin")
		}
	}
	_, err := put(limited(t), conn, beginning("c", "plane one"), "plane one")
	wantStatus(t, "a third upload", err, codes.ResourceExhausted, "takes 2 maps at once")
	for i, st := range waiting {
		if err := st.Send(chunk("plane one")); err != nil {
			t.Fatal(err)
		}
		if r, err := st.CloseAndRecv(); err != nil || r.GetMap().GetName() != []string{"a", "b"}[i] {
			t.Errorf("upload %d: %v, %v", i, r, err)
		}
	}
}

type uploadClient = grpc.ClientStreamingClient[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]

// TestUploadsOfOneName proves that of uploads of one name at once one wins,
// and that with replace the last one does.
func TestUploadsOfOneName(t *testing.T) {
	for _, replace := range []bool{false, true} {
		folder := t.TempDir()
		var s shelf
		u := s.uploads(folder)
		u.AtOnce = 8
		_, conn := serve(t, Config{NewSession: newTally, Uploads: u})
		var wg sync.WaitGroup
		var won atomic.Int64
		for i := range 8 {
			wg.Go(func() {
				content := fmt.Sprint("plane ", i)
				b := beginning("bay", content)
				b.Replace = replace
				switch m, err := put(limited(t), conn, b, content); {
				case err == nil && m.GetName() == "bay":
					won.Add(1)
				default:
					wantStatus(t, "one of eight", err, codes.AlreadyExists, `there is a map "bay"`)
				}
			})
		}
		wg.Wait()
		ms, err := leadlinev1.NewPositionServiceClient(conn).DescribeMap(limited(t), &leadlinev1.DescribeMapRequest{Map: "bay"})
		if err != nil {
			t.Fatal(err)
		}
		b, err := os.ReadFile(filepath.Join(folder, "bay.heights.x"))
		if err != nil || string(b) != "plane "+ms.GetMap().GetFingerprint() {
			t.Errorf("the file says %q, the server %v, %v", b, ms, err)
		}
		if n, want := won.Load(), map[bool]int64{false: 1, true: 8}[replace]; n != want || s.open.Load() != 1 || len(files(t, folder)) != 1 {
			t.Errorf("replace %v: %d won, %d are open, the folder holds %q", replace, n, s.open.Load(), files(t, folder))
		}
	}
}

// TestNoUploads proves that a server that was not told to takes no maps, and
// which settings are refused.
func TestNoUploads(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	_, err := put(limited(t), conn, beginning("bay", "plane one"), "plane one")
	wantStatus(t, "an upload", err, codes.Unimplemented, "takes no maps")
	_, err = New(Config{Uploads: &Uploads{Folder: "/nowhere", Maps: -1}})
	for _, want := range []string{`no folder "/nowhere"`, "need Open and a suffix", "a limit of uploads is negative"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q in it", err, want)
		}
	}
}

// TestDescribeMap proves what is told of a map of each kind.
func TestDescribeMap(t *testing.T) {
	road := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 100}}}, {Arcs: []filtertest.Arc{{LengthM: 50.5}}}}, [][]filtertest.Link{nil, nil})
	town := Map{Name: "town", Space: road, About: MapAbout{SouthWest: geo.FromDegrees(1, 2), NorthEast: geo.FromDegrees(3, 4), Licence: "CC0", VerticalDatum: "EGM96", HeightSigmaM: 2}}
	hills := sea()
	hills.Name, hills.About = "hills", MapAbout{Columns: 30, Rows: 20, SpacingM: 90}
	_, conn := serve(t, Config{NewSession: newTally, Maps: []Map{town, hills}})
	ask := leadlinev1.NewPositionServiceClient(conn)
	d, err := ask.DescribeMap(limited(t), &leadlinev1.DescribeMapRequest{Map: "town"})
	m := d.GetMap()
	if err != nil || m.GetKind() != leadlinev1.MapKind_MAP_KIND_ROADS || m.GetEdges() != 2 || m.GetLengthM() != 150.5 || m.GetSouthWest().GetLon() != 1 || m.GetNorthEast().GetLat() != 4 ||
		m.GetLicence() != "CC0" || m.GetVerticalDatum() != "EGM96" || m.GetHeightSigmaM() != 2 || m.GetFingerprint() != road.Fingerprint() || m.GetColumns() != 0 {
		t.Errorf("town: %v, %v", m, err)
	}
	d, err = ask.DescribeMap(limited(t), &leadlinev1.DescribeMapRequest{Map: "hills"})
	if m := d.GetMap(); err != nil || m.GetKind() != leadlinev1.MapKind_MAP_KIND_HEIGHTS || m.GetColumns() != 30 || m.GetRows() != 20 || m.GetSpacingM() != 90 || m.GetEdges() != 0 || !strings.Contains(m.GetFrame(), "meridian 5°") {
		t.Errorf("hills: %v, %v", m, err)
	}
	_, err = ask.DescribeMap(limited(t), &leadlinev1.DescribeMapRequest{Map: "moon"})
	wantStatus(t, "no map", err, codes.NotFound, `no map "moon" here: known are "hills", "town"`)
	_, err = ask.DescribeMap(limited(t), &leadlinev1.DescribeMapRequest{})
	wantStatus(t, "no name", err, codes.InvalidArgument, "map is missing")
}
