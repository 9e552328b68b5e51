package server

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/study/track"
	leadlinev1 "leadline/proto/leadline/v1"
)

const tableHead = "time,status,lon_deg,lat_deg,truth_lon_deg,truth_lat_deg,error_m,radius95_m,protection_m,alarms\n"

// resultsIn writes a result into a new folder, with other contents of some of its
// files: names and texts in turn.
func resultsIn(t *testing.T, name string, but ...string) string {
	t.Helper()
	dir := t.TempDir()
	files := map[string]string{
		"run.json":   `{"drive": "van", "setting": "given", "map": "/secret/town.roads.arrow", "alert_limit_m": 25}`,
		"score.json": `{"drive": "van", "posteriors": 4, "p95_m": 7.5}`,
		"track.csv": tableHead +
			"2026-01-01T00:00:00Z,ambiguous,5,53,,,,80,,\n" +
			"2026-01-01T00:00:01Z,located,5,53.00001,5,53,1.1,8,30,bias gyro\n" +
			"2026-01-01T00:00:02Z,located,5,53.00002,5,53,2.2,8,30,bias gyro; lost\n" +
			"2026-01-01T00:00:03Z,located,5,53.00003,5,53,3.3,8,30,lost\n",
	}
	for i := 0; i < len(but); i += 2 {
		files[but[i]] = but[i+1]
	}
	at := filepath.Join(dir, filepath.FromSlash(name))
	if err := os.MkdirAll(at, 0o755); err != nil {
		t.Fatal(err)
	}
	for file, text := range files {
		if err := os.WriteFile(filepath.Join(at, file), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// TestResults reads a result as its files have it, and proves that what is no
// result is a sentence, that pages go through all of them, and that neither a name
// nor a link leads out of the folder.
func TestResults(t *testing.T) {
	dir := resultsIn(t, "given/van")
	outside := resultsIn(t, "other/van")
	for _, name := range []string{"given/bent", "given/.half", "given-more", "a/b/c/deep", "a/b/c"} {
		if err := os.MkdirAll(filepath.Join(dir, name), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(dir, name, "run.json"), []byte("<b>"), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	for link, to := range map[string]string{"out": filepath.Join(outside, "other"), "given/van/track.csv.link": "/etc/passwd"} {
		if err := os.Symlink(to, filepath.Join(dir, link)); err != nil {
			t.Fatal(err)
		}
	}
	_, conn := serve(t, Config{Results: dir})
	calls := leadlinev1.NewPositionServiceClient(conn)
	var names []string
	const order = "a/b/c given/bent given/van given-more" // folder by folder
	for token, size := "", uint32(1); size < 6; {
		page, err := calls.ListResults(limited(t), &leadlinev1.ListResultsRequest{PageSize: size, PageToken: token})
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range page.GetResults() {
			names = append(names, r.GetName())
			if bad := r.GetName() != "given/van"; bad != (r.GetTrouble() != "") || bad && !strings.Contains(r.GetTrouble(), r.GetName()+"/run.json") || strings.Contains(r.String(), dir) {
				t.Errorf("listed: %v", r)
			}
		}
		if token = page.GetNextPageToken(); token == "" {
			if got := strings.Join(names, " "); got != order {
				t.Errorf("by %d: %s", size, got)
			}
			names, size = nil, size+1
		}
	}
	got, err := calls.ReadResult(limited(t), &leadlinev1.ReadResultRequest{Name: "given/van"})
	if err != nil {
		t.Fatal(err)
	}
	if r := got.GetResult(); r.GetDrive() != "van" || r.GetMap() != "town.roads.arrow" || r.GetAlertLimitM() != 25 || r.GetP95M() != 7.5 || r.MaxM != nil || r.GetPosteriors() != 4 {
		t.Errorf("result %v", r)
	}
	if m := got.GetMoments(); len(m) != 4 || m[0].GetStatus() != "ambiguous" || m[0].Truth != nil || m[0].ErrorM != nil || m[0].ProtectionM != nil || m[3].GetErrorM() != 3.3 || m[3].GetPosition().GetLat() < 53.00002 {
		t.Errorf("moments %v", m)
	}
	said := ""
	for _, a := range got.GetAlarms() {
		said += fmt.Sprint(a.GetWhat(), " ", a.GetRaised().AsTime().Second(), " ")
		if a.Cleared != nil {
			said += fmt.Sprint("to ", a.GetCleared().AsTime().Second(), " ")
		}
	}
	if said != "bias gyro 1 to 3 lost 2 " {
		t.Errorf("alarms %s", said)
	}
	for _, name := range []string{"..", "../x", "given/../../x", "/etc", "given/van/", "", ".", "given/.half", "a/b/c/deep", `given\van`, "out/van", strings.Repeat("x", 2000)} {
		if _, err := calls.ReadResult(limited(t), &leadlinev1.ReadResultRequest{Name: name}); err == nil || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: %v", name, err)
		}
	}
}

// TestBadResults: each damaged file is one sentence that names it.
func TestBadResults(t *testing.T) {
	row := func(at, rest string) string { return "2026-01-01T00:00:" + at + "Z,located," + rest + "\n" }
	for _, c := range []struct{ file, text, want string }{
		{"run.json", "{", "given/van/run.json: unexpected end"},
		{"score.json", strings.Repeat(" ", maxResultJSON+1), "given/van/score.json has more than"},
		{"track.csv", "", "given/van/track.csv:1: EOF"},
		{"track.csv", tableHead, "given/van/track.csv has no lines"},
		{"track.csv", tableHead + "yesterday,,,,,,,,,\n", "given/van/track.csv:2: time"},
		{"track.csv", tableHead + row("00", ",,,,,8,,"), "a row without a place"},
		{"track.csv", tableHead + row("00", "5,53,,,,Inf,,"), "a row without a place"},
		{"track.csv", tableHead + row("00", "5,53,,,1,8,,"), "an error and no truth"},
		{"track.csv", tableHead + row("02", "5,53,,,,8,,") + row("01", "5,53,,,,8,,"), "goes back in time"},
	} {
		_, conn := serve(t, Config{Results: resultsIn(t, "given/van", c.file, c.text)})
		_, err := leadlinev1.NewPositionServiceClient(conn).ReadResult(limited(t), &leadlinev1.ReadResultRequest{Name: "given/van"})
		if s := saidBy(err); s.reason != leadlinev1.Reason_REASON_BAD_RESULT || !strings.Contains(s.message, c.want) || strings.Contains(s.message, "\n") {
			t.Errorf("%.40q: %+v, want %s", c.text, s, c.want)
		}
	}
}

// TestMoments: of a long run the worst moment is kept, in order, within the bound.
func TestMoments(t *testing.T) {
	const n, worst = 5*maxMoments + 3, 11111
	var m moments
	for i := range n {
		r := track.Row{TimeNS: int64(i) * int64(time.Second), At: geo.FromDegrees(5, 53), ErrorM: float64(i % 7), Truth: geo.FromDegrees(5, 53), Radius95M: 1}
		if i == worst {
			r.ErrorM = 99
		}
		if err := m.add(r); err != nil {
			t.Fatal(err)
		}
	}
	found, before := false, int64(-1)
	for _, r := range m.rows {
		found = found || r.ErrorM == 99 && r.TimeNS == worst*int64(time.Second)
		if r.TimeNS <= before {
			t.Fatalf("%d after %d", r.TimeNS, before)
		}
		before = r.TimeNS
	}
	if !found || len(m.rows) > maxMoments || len(m.rows) < maxMoments/2 {
		t.Errorf("%d moments, the worst among them: %v", len(m.rows), found)
	}
}
