package deploytest

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// tool skips a test where a program of the distribution is not installed. CI installs them all and sets FLUXWARDEN_TOOLS=must.
func tool(t *testing.T, name, debian string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err == nil {
		return path
	}
	if os.Getenv("FLUXWARDEN_TOOLS") == "must" {
		t.Fatalf("%s is not installed; it is in the Debian package %s", name, debian)
	}
	t.Skipf("%s is not installed; it is in the Debian package %s", name, debian)
	return ""
}

func output(t *testing.T, dir string, command ...string) string {
	t.Helper()
	cmd := exec.Command(command[0], command[1:]...)
	cmd.Dir = dir
	out, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("%s: %v\n%s", strings.Join(command, " "), err, out)
	}
	return string(out)
}

// runs says whether a command ends well.
func runs(command ...string) bool { return exec.Command(command[0], command[1:]...).Run() == nil }

// The rules are taken by Prometheus and fire when they must and only then.
func TestAlertRulesInPromtool(t *testing.T) {
	promtool := tool(t, "promtool", "prometheus")
	output(t, file("alerts"), promtool, "check", "rules", "fluxwarden.rules.yaml")
	output(t, file("alerts"), promtool, "check", "config", "prometheus.yaml")
	dir := t.TempDir()
	for name, from := range map[string]string{"prometheus.yaml": "container", "fluxwarden.rules.yaml": "alerts"} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(read(t, from, name)), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	output(t, dir, promtool, "check", "config", "prometheus.yaml")
	text := read(t, "alerts", "fluxwarden.rules.yaml")
	shortened := adviceLine.ReplaceAllString(text, "${1}ADVICE")
	if shortened == text {
		t.Fatal("there is no advice to write as ADVICE")
	}
	for name, text := range map[string]string{"fluxwarden.rules.yaml": shortened,
		"fluxwarden.test.yaml": read(t, "alerts", "fluxwarden.test.yaml"), "fluxwarden.days.test.yaml": read(t, "alerts", "fluxwarden.days.test.yaml")} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	output(t, dir, promtool, "test", "rules", "fluxwarden.test.yaml", "fluxwarden.days.test.yaml")
	// What it says of a rule that is too eager.
	eager := strings.Replace(shortened, "station:fluxwarden_silence_seconds:last5m > 2700", "station:fluxwarden_silence_seconds:last5m > -1", -1)
	if err := os.WriteFile(filepath.Join(dir, "fluxwarden.rules.yaml"), []byte(eager), 0o600); err != nil {
		t.Fatal(err)
	}
	if runs(promtool, "test", "rules", filepath.Join(dir, "fluxwarden.days.test.yaml")) {
		t.Error("a rule that always fires passes the tests")
	}
}

// Every alert has a test in which it fires and one in which it must not.
func TestEveryAlertIsTestedBothWays(t *testing.T) {
	text := read(t, "alerts", "fluxwarden.test.yaml") + read(t, "alerts", "fluxwarden.days.test.yaml")
	for _, r := range ruleList(t) {
		if r.Alert == "" {
			continue
		}
		if !strings.Contains(text, "        alertname: "+r.Alert+"\n        exp_alerts:\n") {
			t.Errorf("%s: no test in which it fires", r.Alert)
		}
		if r.Labels["severity"] != "none" && !strings.Contains(text, "alertname: "+r.Alert+", exp_alerts: []}") {
			t.Errorf("%s: no test in which it must not fire", r.Alert)
		}
	}
}

// The routing is taken by Alertmanager and sends what it should where it should.
func TestRoutingInAmtool(t *testing.T) {
	amtool := tool(t, "amtool", "prometheus-alertmanager")
	output(t, file("alerts"), amtool, "check-config", "alertmanager.yaml")
	for labels, want := range map[string]string{
		"alertname=FluxwardenDeadMan scope=deadman severity=none":                              "deadman",
		"alertname=FluxwardenFault scope=instrument severity=warning station=northmoor":        "people",
		"alertname=FluxwardenDown scope=pipeline severity=critical":                            "people",
		"alertname=FluxwardenCalibrationDue scope=calibration severity=info station=northmoor": "people",
	} {
		got := output(t, file("alerts"), append([]string{amtool, "config", "routes", "test", "--config.file=alertmanager.yaml"}, strings.Fields(labels)...)...)
		if lines := strings.Split(strings.TrimSpace(got), "\n"); lines[len(lines)-1] != want { // a warning may stand before it
			t.Errorf("%s: goes to %q, want %q", labels, got, want)
		}
	}
}
