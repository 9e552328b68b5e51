package page_test

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"

	"leadline/engine/server"
	"leadline/network"
	"leadline/network/roadfile"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain/heightfile"
)

// choose gives files to an input of a name.
func (p *tab) choose(input string, paths ...string) {
	p.t.Helper()
	var doc struct{ Root struct{ NodeID int } }
	var node struct{ NodeID int }
	p.do("DOM.getDocument", nil, &doc)
	p.do("DOM.querySelector", map[string]any{"nodeId": doc.Root.NodeID, "selector": input}, &node)
	p.do("DOM.setFileInputFiles", map[string]any{"nodeId": node.NodeID, "files": paths}, nil)
}

// TestUploading has a map uploaded by mouse, and again by keyboard, and compares with what the
// server then holds; what is wrong with a file, or with who sends it, is a sentence each and leaves
// nothing behind.
func TestUploading(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	from, folder := t.TempDir(), t.TempDir()
	whole := filepath.Join(from, "quay.roads.arrow")
	if err := roadfile.Write(whole, w.maps[0].Roads.(*network.Map)); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(whole)
	if err != nil {
		t.Fatal(err)
	}
	put := func(name string, content []byte) string {
		t.Helper()
		path := filepath.Join(from, name)
		if err := os.WriteFile(path, content, 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	access, token := issuing(t)
	r := serve(t, "127.0.0.1:0", func(c *server.Config) {
		c.Access = access
		c.Uploads = &server.Uploads{
			Folder: folder, MaxBytes: int64(len(data)),
			Suffixes: map[leadlinev1.MapKind]string{leadlinev1.MapKind_MAP_KIND_ROADS: roadfile.Suffix, leadlinev1.MapKind_MAP_KIND_HEIGHTS: heightfile.Suffix},
			Open: func(path string) (server.Map, error) {
				m, file, err := roadfile.Open(path)
				if err != nil {
					return server.Map{}, err
				}
				return server.Map{Space: m, Names: m, Roads: m, Check: func() string { return network.Check(m).String() }, About: w.maps[0].About, Close: file.Close}, nil
			},
		}
	})
	keeper := token("Kay", time.Hour, "administrator")
	held := func() map[string]string {
		t.Helper()
		resp, err := r.calls.ListMaps(r.as(keeper), &leadlinev1.ListMapsRequest{})
		if err != nil {
			t.Fatal(err)
		}
		out := map[string]string{}
		for _, m := range resp.GetMaps() {
			out[m.GetName()] = m.GetFingerprint()
		}
		return out
	}
	before := len(held())
	nothing := func(what string) {
		t.Helper()
		files, err := os.ReadDir(folder)
		if len(held()) != before || len(files) != 0 || err != nil {
			t.Errorf("%s: the server has %v, its folder %v: %v", what, held(), files, err)
		}
	}

	p := b.open(t, r.origin+"/#maps", 1440, 900, false)
	p.show(token("Ada", time.Hour, "dispatcher"))
	const upload = "[...document.querySelectorAll('#upload button')].find(e => e.innerText === 'Upload')"
	p.says(".connection", "Live.")
	p.await("nothing else to come", "!document.querySelector('.identity') && document.querySelectorAll('.cards article').length === 3 && document.querySelectorAll('main details').length === 3 && document.querySelector('main').innerText.includes('The server has no drive.')")
	p.click(upload)
	p.says("#upload-trouble", "There is no file yet")
	p.choose("#upload [name=map]", put("<b>town.geojson", data))
	p.says("#upload-trouble", "The file <b>town.geojson is no compiled map by its name, which must end in .roads.arrow or .heights.tif")
	p.choose("#upload [name=map]", put("empty.roads.arrow", nil))
	p.says("#upload-trouble", "empty.roads.arrow is empty")
	p.choose("#upload [name=map]", whole)
	p.says("#upload .hint", "quay.roads.arrow")
	p.click(upload)
	p.says("#upload-trouble", "Uploading a map needs the role administrator, which you have not.")
	nothing("without the role")

	p.show(keeper)
	p.await("the token is taken", "!document.querySelector('.identity')")
	p.choose("#upload [name=map]", put("large.roads.arrow", append(data, 0)))
	p.click(upload)
	p.says("#upload-trouble", fmt.Sprintf("Upload: the file has %d bytes: at most %d.", len(data)+1, len(data)))
	p.choose("#upload [name=map]", put("torn.roads.arrow", data[:len(data)/2]))
	p.click(upload)
	p.says("#upload-trouble", "Upload: the file")
	p.audit("an upload that is refused")
	t.Logf("of a torn file: %s", p.text("#upload-trouble"))
	p.choose("#upload [name=map]", put("sea.heights.tif", data))
	p.click(upload)
	p.says("#upload .hint", "sea.heights.tif")
	p.says("#upload-trouble", "Upload: the file")
	nothing("refused")

	p.choose("#upload [name=map]", whole)
	p.click(upload)
	p.says("#upload-answer", "The map quay is here: new drives can use it.")
	if got := held(); len(got) != before+1 || got["quay"] != w.maps[0].Space.Fingerprint() {
		t.Errorf("the server has %v", got)
	}
	p.await("its card", fmt.Sprintf("[...document.querySelectorAll('.cards article')].some(e => e.innerText.startsWith('quay') && e.innerText.includes(%q))", w.maps[0].Space.Fingerprint()))
	p.click("[...document.querySelectorAll('button')].find(e => e.ariaLabel === 'Check it: the map quay')")
	p.says("[aria-label='What the check of quay says']", "strongly connected")
	eval[any](p, "document.getElementById('upload').scrollIntoView()")
	p.shoot("upload-light")

	// The same again, by keyboard: refused, and then in its place.
	p.choose("#upload [name=map]", whole)
	p.tabTo("document.querySelector('#upload [name=name]')")
	p.press("Enter")
	p.says("#upload-trouble", `There is a map quay here: give another name, or tick the box.`)
	p.tabTo("document.querySelector('#upload [name=replace]')")
	p.press(" ", "Tab", "Enter")
	p.says("#upload-answer", "The map quay is here: new drives can use it. It is the same as before.")
	files, err := os.ReadDir(folder)
	if err != nil || len(files) != 1 || files[0].Name() != "quay.roads.arrow" || len(held()) != before+1 {
		t.Errorf("the folder has %v, the server %v: %v", files, held(), err)
	}
	p.clean(r.origin, "status of 4")
}
