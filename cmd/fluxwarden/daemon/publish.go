package daemon

import (
	"context"
	"encoding/json"
	"fmt"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// findings publishes changes of episodes to the stream FINDINGS, a JSON object each: the contract of the command faults, with the
// moment of publishing beside it.
type findings struct {
	b     *broker.Broker
	now   func() time.Time
	clock func(station string) (aheadSeconds float64, ok bool)
}

// A FindingLine is an episode as FINDINGS and the command faults write it.
type FindingLine struct {
	ID            string         `json:"id"`
	Rev           int            `json:"rev"`
	Station       string         `json:"station"`
	Instrument    string         `json:"instrument"`
	Kind          string         `json:"kind"`
	AlsoSuspected []string       `json:"also_suspected"`
	Severity      string         `json:"severity"`
	From          time.Time      `json:"from"`
	To            *time.Time     `json:"to"`
	Raised        time.Time      `json:"raised"`
	Confidence    float64        `json:"confidence"`
	Evidence      map[string]any `json:"evidence"`
	Advice        string         `json:"advice"`
	Published     *time.Time     `json:"published,omitempty"`
	Withdrawn     bool           `json:"withdrawn,omitempty"` // later readings took the ground from it
}

// NewFindingLine writes an episode out.
func NewFindingLine(e *fault.Episode) FindingLine {
	at := func(m int64) time.Time { return time.Unix(60*m, 0).UTC() }
	l := FindingLine{ID: e.ID, Rev: e.Rev, Station: e.Station, Instrument: e.Instrument, Kind: e.Kind.String(), AlsoSuspected: []string{},
		Severity: e.Severity.String(), From: at(e.From), Raised: at(e.Raised), Confidence: e.Confidence, Evidence: map[string]any{}, Advice: e.Advice}
	if e.To != fault.Open {
		to := at(e.To)
		l.To = &to
	}
	for _, k := range e.Also {
		l.AlsoSuspected = append(l.AlsoSuspected, k.String())
	}
	for _, ev := range e.Evidence {
		l.Evidence[ev.Name] = map[string]any{"value": ev.Value, "unit": ev.Unit}
	}
	return l
}

// Publish implements worker.Findings.
func (f findings) Publish(ctx context.Context, changes []worker.Finding) error {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	now := f.now().UTC()
	for i := range changes {
		line := NewFindingLine(&changes[i].Episode)
		line.Published, line.Withdrawn = &now, changes[i].Withdrawn
		if changes[i].Episode.Kind == rules.ClockShift && f.clock != nil {
			// When a reading was received depends on its way: it is told here, and is in no row.
			if ahead, ok := f.clock(line.Station); ok {
				line.Evidence["stamps_ahead_of_receipt"] = map[string]any{"value": ahead, "unit": "s"}
			}
		}
		text, err := json.Marshal(line)
		if err != nil {
			return fmt.Errorf("episode %s: %w", line.ID, err)
		}
		if _, err := f.b.JS.Publish(ctx, "findings."+line.Station, text); err != nil {
			return fmt.Errorf("episode %s: %w", line.ID, err)
		}
	}
	return nil
}

// aside puts what the worker cannot judge into the stream REFUSED.
type aside struct {
	b   *broker.Broker
	now func() time.Time
}

// SetAside implements worker.Aside.
func (a aside) SetAside(ctx context.Context, reason, station string, readings []minute.Reading, payload []byte, detail string) error {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	refused, err := gate.OpenRefused(ctx, a.b)
	if err != nil {
		return err
	}
	if payload == nil {
		payload = wire.EncodeJSON(nil, readings)
	}
	return refused.SetAside(ctx, station, a.now(), wire.Reason(reason), detail, max(len(readings), 1), payload)
}
