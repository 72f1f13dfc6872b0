// Package field holds the ways in beside NATS: HTTP, files that grow, MQTT and Modbus. All of them end at one door, the gate, and
// go on only after its answer: that the readings are on disk, or why not.
package field

import (
	"context"
	"net"
)

// A Door takes a payload of one station, as the gate does. It returns when the payload is on disk or refused, or ctx ends.
type Door interface {
	Take(ctx context.Context, station string, payload []byte) (Answer, error)
}

// An Answer is what the door says to one payload. As JSON it is the answer of the gate.
type Answer struct {
	OK      bool      `json:"ok"`                // everything in the payload is on disk
	N       int       `json:"n"`                 // readings of it that are on disk
	Retry   bool      `json:"retry,omitempty"`   // nothing is wrong with it, and nothing of it was taken: send it again later
	Reason  string    `json:"reason,omitempty"`  // why later
	Refused []Refused `json:"refused,omitempty"` // readings that are wrong: sending them again does not help
	More    int       `json:"more,omitempty"`    // refused readings that are not listed
}

// Refused is one refusal in an answer.
type Refused struct {
	Index  int    `json:"index"` // of the reading in the payload, -1 for the whole payload
	Reason string `json:"reason"`
	Detail string `json:"detail"`
}

// Guard says who may bring the readings of a station.
type Guard interface {
	// MaySpeak gives the reason for which the holder of a name and secret may not speak for a station, empty where it may. Without
	// a station it says whether the secret is right.
	MaySpeak(name, secret, station string, remote net.Addr) (reason string)
	// Holds says whether a credential proved before has not been revoked since.
	Holds(name string) bool
	// Refused counts one that was turned away.
	Refused(way, reason string)
}
