package deploytest

import (
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"gopkg.in/yaml.v3"

	"fluxwarden/cmd/fluxwarden/daemon"
)

// The unit is taken by systemd, and leaves little to whoever breaks into the daemon: 2.0 or better of 10.
func TestUnit(t *testing.T) {
	analyze := tool(t, "systemd-analyze", "systemd")
	output(t, ".", analyze, "security", "--offline=true", "--threshold=20", file("systemd", "fluxwarden.service"))
	text := read(t, "systemd", "fluxwarden.service")
	dir := t.TempDir()
	// verify wants the program to be there.
	unit := filepath.Join(dir, "fluxwarden.service")
	if err := os.WriteFile(unit, []byte(strings.Replace(text, "ExecStart=/usr/bin/fluxwarden", "ExecStart=/bin/true", 1)), 0o600); err != nil {
		t.Fatal(err)
	}
	if out := output(t, ".", analyze, "verify", "--man=no", unit); strings.Contains(out, "fluxwarden.service:") {
		t.Errorf("systemd-analyze verify: %s", out)
	}
	for _, want := range []string{"Type=notify", "WatchdogSec=", "StateDirectory=fluxwarden", "DynamicUser=yes", "LoadCredential=", "RestartPreventExitStatus=2", "ExecReload="} {
		if !strings.Contains(text, "\n"+want) {
			t.Errorf("the unit has no %s", want)
		}
	}
	weak := strings.NewReplacer("ProtectSystem=strict\n", "", "CapabilityBoundingSet=\n", "", "PrivateUsers=yes\n", "", "SystemCallFilter=@system-service\n", "", "DynamicUser=yes\n", "").Replace(text)
	if err := os.WriteFile(unit, []byte(weak), 0o600); err != nil {
		t.Fatal(err)
	}
	if runs(analyze, "security", "--offline=true", "--threshold=20", unit) {
		t.Error("a unit that protects little passes")
	}
}

// The settings that are shipped are taken by the daemon.
func TestShippedSettings(t *testing.T) {
	t.Setenv("STATE_DIRECTORY", t.TempDir())
	for _, name := range []string{"systemd", "container"} {
		s, err := daemon.LoadSettings(file(name, "settings.yaml"))
		if err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if !strings.HasPrefix(s.Archive, os.Getenv("STATE_DIRECTORY")) || !strings.HasPrefix(s.Notify.Sent, os.Getenv("STATE_DIRECTORY")) {
			t.Errorf("%s: archive %s, sent %s: not in the state directory", name, s.Archive, s.Notify.Sent)
		}
	}
}

var containerWords = regexp.MustCompile(`(?m)^(FROM|ARG|LABEL|COPY|ENV|USER|VOLUME|EXPOSE|STOPSIGNAL|HEALTHCHECK|ENTRYPOINT|CMD) `)

// The build file and the compose file say what an image of ours must: no base that is not pinned, not root, read-only, one volume, health by
// HTTP and no shell.
func TestContainerFiles(t *testing.T) {
	text := read(t, "container", "Containerfile")
	for _, line := range strings.Split(strings.ReplaceAll(text, "\\\n", " "), "\n") {
		if line != "" && !strings.HasPrefix(line, "#") && !containerWords.MatchString(line) {
			t.Errorf("Containerfile: %q: not a word that it should use", line)
		}
		if base, ok := strings.CutPrefix(line, "FROM "); ok && base != "scratch" && !strings.Contains(base, "@sha256:") {
			t.Errorf("Containerfile: the base %s is not pinned", base)
		}
		for _, word := range []string{"ENTRYPOINT ", "CMD "} {
			if rest, ok := strings.CutPrefix(line, word); ok && !strings.HasPrefix(rest, "[") {
				t.Errorf("Containerfile: %s needs a shell", line)
			}
		}
	}
	for _, want := range []string{"\nUSER 65532:65532\n", "\nVOLUME [\"/state\"]\n", "\nSTOPSIGNAL SIGTERM\n", "CMD [\"/fluxwarden\", \"health\"", "org.opencontainers.image.licenses"} {
		if !strings.Contains(text, want) {
			t.Errorf("Containerfile has no %q", want)
		}
	}
	var compose struct {
		Services map[string]struct {
			Image       string
			ReadOnly    bool     `yaml:"read_only"`
			CapDrop     []string `yaml:"cap_drop"`
			User        string
			Volumes     []string
			Healthcheck struct{ Test []string }
		}
		Volumes map[string]struct{}
	}
	if err := yaml.Unmarshal([]byte(read(t, "container", "compose.yaml")), &compose); err != nil {
		t.Fatal(err)
	}
	s := compose.Services["fluxwarden"]
	if !s.ReadOnly || !slices.Contains(s.CapDrop, "ALL") || s.User != "65532:65532" || len(s.Healthcheck.Test) < 2 || s.Healthcheck.Test[0] != "CMD" {
		t.Errorf("compose: fluxwarden: %+v", s)
	}
	for name, s := range compose.Services {
		if s.Image == "" || strings.HasSuffix(s.Image, ":latest") || !strings.Contains(s.Image, ":") {
			t.Errorf("compose: %s: image %q has no version", name, s.Image)
		}
		for _, v := range s.Volumes {
			from, _, _ := strings.Cut(v, ":")
			if _, named := compose.Volumes[from]; named || from == "./config" {
				continue
			}
			if _, err := os.Stat(filepath.Join(file("container"), from)); err != nil {
				t.Errorf("compose: %s: %v", name, err)
			}
		}
	}
	if len(compose.Services) != 3 {
		t.Errorf("compose has %d services", len(compose.Services))
	}
}

// Each file in deploy/ is known to a test: one that nobody looks at is found here.
func TestEveryFileIsExercised(t *testing.T) {
	known := map[string]string{
		"OPERATIONS.md": "TestAlertsAreComplete", "Makefile": "CI step package", "release.sh": "CI step package", "backup.sh": "CI step backup",
		"alerts/fluxwarden.rules.yaml": "TestAlertRulesInPromtool", "alerts/fluxwarden.test.yaml": "TestAlertRulesInPromtool", "alerts/fluxwarden.days.test.yaml": "TestAlertRulesInPromtool",
		"alerts/alertmanager.yaml": "TestRoutingInAmtool", "alerts/prometheus.yaml": "TestAlertRulesInPromtool", "alerts/README.md": "",
		"systemd/fluxwarden.service": "TestUnit", "systemd/settings.yaml": "TestShippedSettings",
		"container/Containerfile": "TestContainerFiles", "container/compose.yaml": "TestContainerFiles", "container/settings.yaml": "TestShippedSettings",
		"container/prometheus.yaml": "TestAlertRulesInPromtool", "container/layout.sh": "CI step package",
	}
	err := filepath.WalkDir(file(), func(path string, d fs.DirEntry, err error) error {
		name := filepath.ToSlash(strings.TrimPrefix(path, file()+string(filepath.Separator)))
		switch {
		case err != nil:
			return err
		case d.IsDir() && name == "out":
			return fs.SkipDir
		case d.IsDir() || strings.HasPrefix(name, "debian/"): // all of debian/ goes into the package, or makes it
			return nil
		case known[name] == "":
			t.Errorf("deploy/%s: no test knows it", name)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}
