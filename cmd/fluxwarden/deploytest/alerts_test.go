package deploytest

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"gopkg.in/yaml.v3"

	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/rules"
)

var update = flag.Bool("update", false, "write the derived parts of the files of deploy/ anew")

// file is the path of a file of deploy/.
func file(name ...string) string {
	return filepath.Join(append([]string{"..", "..", "..", "deploy"}, name...)...)
}

func read(t *testing.T, name ...string) string {
	t.Helper()
	text, err := os.ReadFile(file(name...))
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// A ruleFile is what is looked at of a file of rules.
type ruleFile struct {
	Groups []struct {
		Name  string
		Rules []rule
	}
}

type rule struct {
	Record, Alert, Expr string
	For                 string
	KeepFiringFor       string `yaml:"keep_firing_for"`
	Labels, Annotations map[string]string
}

func ruleList(t *testing.T) []rule {
	t.Helper()
	var f ruleFile
	if err := yaml.Unmarshal([]byte(read(t, "alerts", "fluxwarden.rules.yaml")), &f); err != nil {
		t.Fatal(err)
	}
	var all []rule
	for _, g := range f.Groups {
		all = append(all, g.Rules...)
	}
	if len(all) < 10 {
		t.Fatalf("only %d rules", len(all))
	}
	return all
}

// metricNames are the names that the daemon exports, and those that Prometheus makes of them.
func metricNames(t *testing.T) map[string]bool {
	t.Helper()
	m := metrics.New("test", time.Now)
	m.NewField()
	descs := make(chan *prometheus.Desc, 1000)
	go func() { m.Registry.Describe(descs); close(descs) }()
	names := map[string]bool{}
	fq := regexp.MustCompile(`fqName: "([^"]+)"`)
	for d := range descs {
		name := fq.FindStringSubmatch(d.String())[1]
		for _, suffix := range []string{"", "_bucket", "_sum", "_count"} {
			names[name+suffix] = true
		}
	}
	if len(names) < 40 {
		t.Fatalf("only %d names", len(names))
	}
	return names
}

var metricInText = regexp.MustCompile(`\bfluxwarden_[a-z0-9_]+`)

// unknownMetrics are the names in an expression that are neither exported nor recorded.
func unknownMetrics(expr string, known, recorded map[string]bool) []string {
	for r := range recorded {
		expr = strings.ReplaceAll(expr, r, "")
	}
	var unknown []string
	for _, name := range metricInText.FindAllString(expr, -1) {
		if !known[name] {
			unknown = append(unknown, name)
		}
	}
	return unknown
}

// A rule on a metric that nobody exports never fires, and nothing says so: this does.
func TestRulesUseMetricsThatThereAre(t *testing.T) {
	known, recorded := metricNames(t), map[string]bool{}
	for _, r := range ruleList(t) {
		if r.Record != "" {
			recorded[r.Record] = true
		}
	}
	for _, r := range ruleList(t) {
		for _, name := range unknownMetrics(r.Expr, known, recorded) {
			t.Errorf("%s%s: no metric %s", r.Alert, r.Record, name)
		}
	}
	if len(unknownMetrics("fluxwarden_station_lagg_seconds > 3", known, recorded)) != 1 {
		t.Error("an unknown metric is not found")
	}
}

// Each alert says how bad, what, and where to read on; and its section of the operations guide is there.
func TestAlertsAreComplete(t *testing.T) {
	guide := read(t, "OPERATIONS.md")
	for _, r := range ruleList(t) {
		if r.Alert == "" {
			continue
		}
		if !strings.HasPrefix(r.Alert, "Fluxwarden") {
			t.Errorf("%s: want the prefix Fluxwarden", r.Alert)
		}
		switch r.Labels["severity"] {
		case "critical", "warning", "info", "none":
		default:
			t.Errorf("%s: severity %q", r.Alert, r.Labels["severity"])
		}
		if r.KeepFiringFor == "" && r.Labels["severity"] != "none" {
			t.Errorf("%s: no keep_firing_for", r.Alert)
		}
		for _, key := range []string{"summary", "description", "runbook_url"} {
			if r.Annotations[key] == "" {
				t.Errorf("%s: no %s", r.Alert, key)
			}
		}
		if want := "OPERATIONS.md#" + strings.ToLower(r.Alert); !strings.HasSuffix(r.Annotations["runbook_url"], want) {
			t.Errorf("%s: runbook_url %s does not end in %s", r.Alert, r.Annotations["runbook_url"], want)
		}
		_, section, found := strings.Cut(guide, "\n### "+r.Alert+"\n")
		section, _, _ = strings.Cut(section, "\n#")
		if !found || len(strings.Fields(section)) < 15 {
			t.Errorf("%s: OPERATIONS.md has no section of that name that says what to do", r.Alert)
		}
	}
	for _, m := range regexp.MustCompile(`(?m)^### (Fluxwarden\w+)$`).FindAllStringSubmatch(guide, -1) {
		if !strings.Contains(read(t, "alerts", "fluxwarden.rules.yaml"), "alert: "+m[1]+"\n") {
			t.Errorf("OPERATIONS.md has a section on %s, which is no alert", m[1])
		}
	}
}

// adviceTemplate writes the catalogue's advice as a template over the label fault.
func adviceTemplate() string {
	var b strings.Builder
	for i, e := range rules.Catalogue() {
		word := "else if"
		if i == 0 {
			word = "if"
		}
		fmt.Fprintf(&b, "{{ %s eq $labels.fault %q }}%s", word, e.Kind.String(), e.Advice)
	}
	b.WriteString("{{ end }}")
	return b.String()
}

var adviceLine = regexp.MustCompile(`(?m)^( *advice: )(ADVICE|'.*eq \$labels\.fault.*')$`)

// The advice in the alert is that of the catalogue, word for word.
func TestAdviceIsTheCatalogues(t *testing.T) {
	text := read(t, "alerts", "fluxwarden.rules.yaml")
	want := adviceLine.ReplaceAllStringFunc(text, func(line string) string {
		return adviceLine.FindStringSubmatch(line)[1] + "'" + strings.ReplaceAll(adviceTemplate(), "'", "''") + "'"
	})
	if !adviceLine.MatchString(text) {
		t.Fatal("no advice of a fault in the rules")
	}
	if want == text {
		return
	}
	if !*update {
		t.Fatal("the advice in fluxwarden.rules.yaml is not the catalogue's; write it anew with -update")
	}
	if err := os.WriteFile(file("alerts", "fluxwarden.rules.yaml"), []byte(want), 0o644); err != nil {
		t.Fatal(err)
	}
}
