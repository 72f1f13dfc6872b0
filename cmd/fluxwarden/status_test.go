package main

import (
	"encoding/json"
	"net/http"
	"net/http/httptest"
	"path/filepath"
	"testing"

	"fluxwarden/cmd/fluxwarden/daemon"
)

// The sheet of an archive names what is open, what is over and was looked at, and no more; a daemon's is read like it.
func TestStatusOfAnArchive(t *testing.T) {
	archive := filepath.Join(t.TempDir(), "archive")
	if code := cmdJudge([]string{"--site", "../../testdata/readme/site.yaml", "--archive", archive, "../../testdata/readme/readings.csv"}); code != exitOK {
		t.Fatalf("judge: exit code %d", code)
	}
	sheet, err := sheetOf(archive, "")
	if err != nil {
		t.Fatal(err)
	}
	if sheet.Asked != 1 || sheet.Until != "2026-06-22T00:00:00Z" {
		t.Errorf("%+v", sheet)
	}
	for _, s := range sheet.Stations {
		for _, l := range s.Lines {
			if l.To == nil || l.Repair != "worked" {
				t.Errorf("flintpan: %+v", l)
			}
		}
	}
	server := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if r.URL.Path != "/status.json" {
			http.NotFound(w, r)
			return
		}
		if err := json.NewEncoder(w).Encode(daemon.Sheet{Asked: 2, Stations: []daemon.SheetStation{{Station: "a"}, {Station: "b"}}}); err != nil {
			t.Error(err)
		}
	}))
	defer server.Close()
	got, err := askSheet(server.URL+"/", "b")
	if err != nil || len(got.Stations) != 1 || got.Stations[0].Station != "b" {
		t.Errorf("%+v, %v", got, err)
	}
	if _, err := askSheet(server.URL+"/elsewhere", ""); err == nil {
		t.Error("a page that is no sheet was taken")
	}
	for _, c := range []struct {
		args []string
		code int
	}{
		{[]string{"--archive", archive}, exitOK},
		{[]string{"--archive", archive, "--json"}, exitOK},
		{[]string{"--daemon", server.URL}, exitOK},
		{nil, exitUsage},
		{[]string{"--archive", archive, "--daemon", server.URL}, exitUsage},
		{[]string{"--archive", filepath.Join(archive, "none")}, exitProblem},
		{[]string{"--archive", archive, "--station", "nowhere"}, exitProblem},
	} {
		if code := cmdStatus(c.args); code != c.code {
			t.Errorf("%v: exit code %d, want %d", c.args, code, c.code)
		}
	}
}
