package engine

import (
	"encoding/json"

	"fluxwarden/qc/fault"
)

// HistoryDays is how many day summaries the judge looks back on: what it has learnt by a day is a function of these alone.
const HistoryDays = 30

// HindsightDays bounds how far back before its raising an episode may reach, and so which days' verdicts it can change.
const HindsightDays = 10

// A DaySummary is all that later days may know of a day: what was learnt, quantised, the episodes that ended in it and those
// still open at its end. It is stored as JSON; fields are only added.
type DaySummary struct {
	Station string          `json:"station"`
	Day     int64           `json:"day"`
	Facts   fault.DayFacts  `json:"facts"`
	Carry   fault.Carry     `json:"carry"`
	Open    []fault.Episode `json:"-"` // they stand in the carry
	Closed  []fault.Episode `json:"closed,omitempty"`
	Offsets []OffsetFacts   `json:"offsets,omitempty"`
}

// EncodeSummary writes a summary as the archive keeps it.
func EncodeSummary(s *DaySummary) ([]byte, error) { return json.Marshal(s) }

// DecodeSummary reads what EncodeSummary wrote.
func DecodeSummary(text []byte) (DaySummary, error) {
	var s DaySummary
	if err := json.Unmarshal(text, &s); err != nil {
		return s, err
	}
	s.Open = s.Carry.Open
	return s, nil
}
