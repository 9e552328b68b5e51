package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestPageIsCurrent proves that the page is the one that the tables make.
func TestPageIsCurrent(t *testing.T) {
	tables, err := readAll(os.DirFS("../../" + folder))
	if err != nil {
		t.Fatal(err)
	}
	got, err := os.ReadFile("../../" + page)
	if err != nil {
		t.Fatal(err)
	}
	if string(got) != Page(tables) {
		t.Errorf("%s is not what %s makes: run make evidence", page, folder)
	}
}

func TestKeep(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.json")
	from := Table{Kind: "study", Code: "abc", On: "two cores"}
	rows := `[{"claim":"a|b","target":"≥ 0.9","figure":0.91234,"low":0.8,"high":null,"n":7,"met":false,"missing":3,"reason":"known"},
		{"claim":"c","target":"1","figure":123456.7,"low":1,"high":2,"n":8,"met":false}]`
	if err := keep(path, from, []byte(rows)); err != nil {
		t.Fatal(err)
	}
	tables, err := readAll(os.DirFS(filepath.Dir(path)))
	if err != nil || len(tables) != 1 {
		t.Fatalf("%d tables, %v", len(tables), err)
	}
	text := Page(tables)
	for _, want := range []string{
		"Code of abc, on two cores:\n", "## Studies of recorded drives\n\n`make study`\n", "\n1. known\n",
		`| a\|b (1) | ≥ 0.9 | 0.9123 |  | 7 | 3 to be drawn |`, "| c | 1 | 123457 | 1 to 2 | 8 | **no** |",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q in:\n%s", want, text)
		}
	}
	for name, c := range map[string]struct {
		from Table
		rows string
	}{
		"an unknown table":  {Table{Kind: "x", Code: "a", On: "b"}, rows},
		"no rows":           {from, "[]"},
		"truncated":         {from, rows[:40]},
		"a row of nothing":  {from, `[{"met":true}]`},
		"drawn by nobody":   {Table{Kind: "study", On: "b"}, rows},
		"not a list of row": {from, `{"rows":1}`},
	} {
		if err := keep(path, c.from, []byte(c.rows)); err == nil {
			t.Errorf("%s is kept", name)
		}
	}
}
