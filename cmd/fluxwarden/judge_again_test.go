package main

import (
	"bytes"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/store"
	"fluxwarden/store/export"
	"fluxwarden/store/vfs"
)

// What an archive says depends on the set of readings, not on how many runs brought them or whether some came twice. The readings
// are those of README's tour: three days with two faults on the last.
func TestJudgeInPieces(t *testing.T) {
	const folder = "../../testdata/readme/"
	text, err := os.ReadFile(folder + "readings.csv")
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.SplitAfter(string(text), "\n")
	midnight := slices.IndexFunc(lines, func(l string) bool { return strings.HasPrefix(l, "2026-06-21T00:00:00Z") })
	piece := func(from, to int) string { return lines[0] + strings.Join(lines[from:to], "") }
	all := len(lines)
	want := judgedPieces(t, piece(1, all))
	if strings.Count(want, "\n") < 4320 || !strings.Contains(want, "pointing_lost") {
		t.Fatalf("the whole file gives too little: %d bytes", len(want))
	}
	for name, pieces := range map[string][]string{
		"twice":                           {piece(1, all), piece(1, all)},
		"cut in a day":                    {piece(1, 3000), piece(3000, all)},
		"cut where a stamp's day begins":  {piece(1, midnight), piece(midnight, all)},
		"cut where a minute's day begins": {piece(1, midnight+1), piece(midnight+1, all)},
		"the later first":                 {piece(midnight+1, all), piece(1, midnight+1)},
		"overlapping":                     {piece(1, 3500), piece(2500, all)},
	} {
		t.Run(name, func(t *testing.T) {
			if got := judgedPieces(t, pieces...); got != want {
				t.Errorf("differs from judging all at once; first difference:\n%s", firstDifference(got, want))
			}
		})
	}
}

// judgedPieces judges files one after the other into one archive and gives its minutes and episodes as text.
func judgedPieces(t *testing.T, pieces ...string) string {
	t.Helper()
	dir := t.TempDir()
	archive := filepath.Join(dir, "archive")
	for _, p := range pieces {
		file := filepath.Join(dir, "piece.csv")
		if err := os.WriteFile(file, []byte(p), 0o600); err != nil {
			t.Fatal(err)
		}
		if code := cmdJudge([]string{"--site", "../../testdata/readme/site.yaml", "--archive", archive, file}); code != exitOK {
			t.Fatalf("judge gave %d", code)
		}
	}
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if _, err := export.CSV(&out, a, export.Request{Station: "flintpan", From: 0, To: 1 << 30}); err != nil {
		t.Fatal(err)
	}
	episodes, err := a.Faults("flintpan")
	if err != nil {
		t.Fatal(err)
	}
	for i := range episodes {
		line := daemon.NewFindingLine(&episodes[i])
		out.WriteString(strings.Join([]string{line.ID, line.Kind, line.Instrument, line.From.String(), line.Raised.String()}, " ") + "\n")
	}
	return out.String()
}

func firstDifference(got, want string) string {
	g, w := strings.Split(got, "\n"), strings.Split(want, "\n")
	for i := range min(len(g), len(w)) {
		if g[i] != w[i] {
			return "got  " + g[i] + "\nwant " + w[i]
		}
	}
	return "one is longer"
}
