package main

import (
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

const rejudgeAgainEnv = "FLUXWARDEN_TEST_REJUDGE"

// TestRejudgeHelper is the process that TestKilledRejudge kills.
func TestRejudgeHelper(t *testing.T) {
	args := os.Getenv(rejudgeAgainEnv)
	if args == "" {
		t.Skip("run by TestKilledRejudge only")
	}
	os.Exit(cmdRejudge(strings.Split(args, "\n")))
}

// A rejudge that is killed leaves the archive whole: as before, or as after. It can be run again.
func TestKilledRejudge(t *testing.T) {
	b := newYard(t, 14)
	archive := filepath.Join(b.dir, "archive")
	b.judge(archive, b.days...)
	sites := []string{b.write("a.yaml", yard("start", "2026-06-03", "8.62")), b.write("b.yaml", yard("start", "2026-06-03", "8.70"))}
	want := map[string]bool{}
	for _, site := range []string{sites[1], sites[0]} {
		if code, _, said := b.run(cmdRejudge, "--site", site, "--archive", archive, "--yes"); code != exitOK {
			t.Fatal(said)
		}
		d, _ := b.digests(archive)
		want[fmt.Sprint(d)] = true
	}
	rejudge := func(site string) *exec.Cmd {
		c := exec.Command(os.Args[0], "-test.run", "^TestRejudgeHelper$")
		c.Env = append(os.Environ(), rejudgeAgainEnv+"="+strings.Join([]string{"--site", site, "--archive", archive, "--yes"}, "\n"))
		return c
	}
	begun := time.Now()
	if out, err := rejudge(sites[1]).CombinedOutput(); err != nil {
		t.Fatalf("%v %s", err, out)
	}
	took := time.Since(begun)
	r := rand.New(rand.NewPCG(8, 8))
	for i := range 8 {
		c := rejudge(sites[i%2])
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		kill := time.AfterFunc(time.Duration(r.Int64N(int64(took))), func() { _ = c.Process.Kill() })
		_ = c.Wait()
		kill.Stop()
		if code, out, said := b.run(cmdVerify, "--archive", archive); code != exitOK {
			t.Errorf("kill %d: %s%s", i, out, said)
		}
		if d, _ := b.digests(archive); !want[fmt.Sprint(d)] {
			t.Errorf("kill %d: rows of neither rule set", i)
		}
	}
	if code, _, said := b.run(cmdRejudge, "--site", sites[0], "--archive", archive, "--yes"); code != exitOK {
		t.Errorf("after the kills: %s", said)
	}
}
