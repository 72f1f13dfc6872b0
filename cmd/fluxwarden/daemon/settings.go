package daemon

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"gopkg.in/yaml.v3"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/broker"
)

// Settings are what the daemon itself needs; nothing of them can change a row. In a file, sizes and durations carry a unit.
type Settings struct {
	Archive     string   `yaml:"archive"`      // directory of the archive
	Listen      string   `yaml:"listen"`       // address of console and metrics; "none" for none
	Grace       Duration `yaml:"grace"`        // how long a minute waits for its readings
	CommitEvery Duration `yaml:"commit_every"` // how often what was judged is written
	DiskFloor   Size     `yaml:"disk_floor"`   // with less free than this, no reading is taken
	// DiskBudget is what journal, archive and the floor as a reserve may take together; 0 is the whole disk. Above it no reading is taken. Nothing
	// is deleted to make room.
	DiskBudget Size `yaml:"disk_budget"`
	// KeepRaw is for how long readings as received are kept; 0s is for ever. Days whose readings are gone cannot be judged again.
	KeepRaw Duration `yaml:"keep_raw"`
	// KeepSuperseded is how much the replaced revisions may take before the earliest are deleted; 0B is any amount.
	KeepSuperseded Size            `yaml:"keep_superseded"`
	Broker         BrokerSettings  `yaml:"broker"`
	Access         AccessSettings  `yaml:"access"`
	TLS            TLSSettings     `yaml:"tls"`
	Ways           WaySettings     `yaml:"ways"`
	Notify         NotifySettings  `yaml:"notify"`
	Console        ConsoleSettings `yaml:"console"`
	Edge           EdgeSettings    `yaml:"edge"`
	Hub            HubSettings     `yaml:"hub"`
}

// BrokerSettings say which broker is used. With a URL it is an external one; without, it runs in this process.
type BrokerSettings struct {
	URL         string `yaml:"url"`
	Credentials string `yaml:"credentials"` // file for an external broker
	Store       string `yaml:"store"`       // directory of the embedded broker's streams
	Listen      string `yaml:"listen"`      // address at which the embedded broker takes readings; "none" for none
	Journal     Size   `yaml:"journal"`     // bound of the stream JOURNAL
	Refused     Size   `yaml:"refused"`
	Findings    Size   `yaml:"findings"`
}

// ConsoleSettings are of the pages.
type ConsoleSettings struct {
	People string `yaml:"people"` // file of who may sign in and write notes, made by `fluxwarden people`; empty is nobody
}

// DefaultSettings are those of a few stations on a small machine. Under systemd the state directory is used.
func DefaultSettings() Settings {
	state := os.Getenv("STATE_DIRECTORY")
	if state == "" {
		state = "fluxwarden-data"
	}
	streams := broker.DefaultStreams()
	return Settings{Archive: filepath.Join(state, "archive"), Listen: "127.0.0.1:9470", Grace: Duration(worker.GraceDefault),
		CommitEvery: Duration(worker.CommitEveryDefault), DiskFloor: 256 << 20,
		Broker: BrokerSettings{Store: filepath.Join(state, "journal"), Listen: "127.0.0.1:4222", Journal: Size(streams.JournalBytes),
			Refused: Size(streams.RefusedBytes), Findings: Size(streams.FindingsBytes)},
		Access: AccessSettings{Anonymous: "auto"}, Ways: WaySettings{HTTP: "none", MQTT: "none", State: filepath.Join(state, "ways")},
		Hub:    HubSettings{Listen: "none", CatchUp: 5000},
		Notify: NotifySettings{Zone: "UTC", Sent: filepath.Join(state, "notify.jsonl")}}
}

// Example is a settings file with every key and its default.
func (s Settings) Example() string {
	b, err := yaml.Marshal(s)
	if err != nil {
		return ""
	}
	return string(b)
}

// LoadSettings reads a settings file over the defaults. It is strict: an unknown key is an error with its line.
func LoadSettings(path string) (Settings, error) {
	s := DefaultSettings()
	text, err := os.ReadFile(path)
	if err != nil {
		return s, fmt.Errorf("settings file: %w", err)
	}
	dec := yaml.NewDecoder(bytes.NewReader(text))
	dec.KnownFields(true)
	if err := dec.Decode(&s); err != nil && !errors.Is(err, io.EOF) {
		return s, fmt.Errorf("%s: %s; the keys and their defaults are listed by fluxwarden run --print-settings", path, strings.TrimPrefix(yamlCause(err), "yaml: "))
	}
	return s, s.Check()
}

func yamlCause(err error) string {
	text := strings.ReplaceAll(err.Error(), "yaml: unmarshal errors:\n  ", "")
	text = strings.ReplaceAll(text, " not found in type daemon.Settings", " is not a setting")
	text = strings.ReplaceAll(text, " not found in type daemon.BrokerSettings", " is not a setting of broker")
	for kind, of := range map[string]string{"Access": "access", "TLS": "tls", "Way": "ways", "Edge": "edge", "Hub": "hub"} {
		text = strings.ReplaceAll(text, " not found in type daemon."+kind+"Settings", " is not a setting of "+of)
	}
	return strings.ReplaceAll(strings.ReplaceAll(text, "field ", ""), "\n  ", "; ")
}

// Check says what is wrong with the settings.
func (s *Settings) Check() error {
	switch {
	case s.Archive == "":
		return errors.New("settings: archive: empty; name a directory")
	case s.Grace <= 0 || time.Duration(s.Grace) > time.Hour:
		return fmt.Errorf("settings: grace: %v: give more than 0s and at most 1h", time.Duration(s.Grace))
	case time.Duration(s.CommitEvery) < time.Second || time.Duration(s.CommitEvery) > 24*time.Hour:
		return fmt.Errorf("settings: commit_every: %v: give 1s to 24h", time.Duration(s.CommitEvery))
	case s.KeepRaw != 0 && time.Duration(s.KeepRaw) < worker.KeepRawLeast:
		return fmt.Errorf("settings: keep_raw: %v: give 0s for ever, or at least %v: a late reading or a note is judged with the month before it", time.Duration(s.KeepRaw), worker.KeepRawLeast)
	case s.DiskBudget < 0 || s.KeepSuperseded < 0 || s.DiskFloor < 0:
		return errors.New("settings: disk_budget, keep_superseded, disk_floor: give a size, or 0B")
	case s.Broker.URL == "" && s.Broker.Store == "":
		return errors.New("settings: broker: give the url of a broker, or a store directory for the embedded one")
	case s.Broker.Journal < 1<<20:
		return fmt.Errorf("settings: broker: journal: %v: give at least 1MiB", s.Broker.Journal)
	}
	if err := s.Notify.check(); err != nil {
		return err
	}
	return s.checkWays()
}

// A Duration is written with its unit: 90s, 10m.
type Duration time.Duration

// UnmarshalYAML implements yaml.Unmarshaler.
func (d *Duration) UnmarshalYAML(n *yaml.Node) error {
	v, err := time.ParseDuration(n.Value)
	if err != nil {
		return fmt.Errorf("line %d: %q is not a duration; write it with its unit, such as 90s or 10m", n.Line, n.Value)
	}
	*d = Duration(v)
	return nil
}

// MarshalYAML implements yaml.Marshaler.
func (d Duration) MarshalYAML() (any, error) { return time.Duration(d).String(), nil }

// A Size is a number of bytes, written with its unit: 512MiB, 2GiB.
type Size int64

var sizeUnits = []struct {
	name  string
	bytes int64
}{{"TiB", 1 << 40}, {"GiB", 1 << 30}, {"MiB", 1 << 20}, {"KiB", 1 << 10}, {"TB", 1e12}, {"GB", 1e9}, {"MB", 1e6}, {"kB", 1e3}, {"B", 1}}

// ParseSize reads a size.
func ParseSize(text string) (Size, error) {
	for _, u := range sizeUnits {
		if number, ok := strings.CutSuffix(text, u.name); ok {
			v, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
			if err != nil || v < 0 || v*float64(u.bytes) > 1<<62 {
				break
			}
			return Size(v * float64(u.bytes)), nil
		}
	}
	return 0, fmt.Errorf("%q is not a size; write it with its unit, such as 512MiB or 2GiB", text)
}

func (s Size) String() string {
	for _, u := range sizeUnits[:4] {
		if int64(s) >= u.bytes && int64(s)%u.bytes == 0 {
			return strconv.FormatInt(int64(s)/u.bytes, 10) + u.name
		}
	}
	return strconv.FormatInt(int64(s), 10) + "B"
}

// UnmarshalYAML implements yaml.Unmarshaler.
func (s *Size) UnmarshalYAML(n *yaml.Node) error {
	v, err := ParseSize(n.Value)
	if err != nil {
		return fmt.Errorf("line %d: %w", n.Line, err)
	}
	*s = v
	return nil
}

// MarshalYAML implements yaml.Marshaler.
func (s Size) MarshalYAML() (any, error) { return s.String(), nil }
