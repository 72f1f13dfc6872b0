package daemon

import (
	"errors"
	"fmt"
	"net"

	"fluxwarden/ingest/broker"
)

// AccessSettings say who may bring readings.
type AccessSettings struct {
	Credentials string `yaml:"credentials"` // file made by fluxwarden credentials; empty for none
	Anonymous   string `yaml:"anonymous"`   // loopback: from this machine without a credential; never; auto: loopback while no file is named
}

// TLSSettings name the certificate of every listener for readings; empty for no TLS.
type TLSSettings struct {
	Certificate string `yaml:"certificate"` // PEM file, with its chain; a renewed file is taken up by itself
	Key         string `yaml:"key"`         // PEM file
	ClientCA    string `yaml:"client_ca"`   // PEM file; clients must show a certificate signed by one in it
}

// WaySettings say on which addresses readings are taken beside NATS; "none" for none.
type WaySettings struct {
	HTTP  string `yaml:"http"`
	MQTT  string `yaml:"mqtt"`
	State string `yaml:"state"` // directory that keeps how far followed files were taken
}

// EdgeSettings make the daemon an edge of a hub: its journal is kept until the hub has it.
type EdgeSettings struct {
	Hub         string `yaml:"hub"`         // nats-leaf://host:7422 or tls://host:7422; empty: no edge
	Credentials string `yaml:"credentials"` // file of the edge's secret, made at the hub by fluxwarden credentials new --role edge
	CA          string `yaml:"ca"`          // file of the authority that signed the hub's certificate
}

// HubSettings make the daemon a hub: it reads the journals of its edges, which are those that have a credential.
type HubSettings struct {
	Listen string `yaml:"listen"` // address for edges; none for no hub
	// CatchUp bounds how many readings a second are taken from one edge while what it sends is older than a minute, so that live data of
	// the others stay live.
	CatchUp int `yaml:"catch_up_readings_per_second"`
}

// checkWays refuses what would let strangers in.
func (s *Settings) checkWays() error {
	switch s.Access.Anonymous {
	case "auto", "loopback", "never":
	default:
		return fmt.Errorf("settings: access: anonymous: %q: it is auto, loopback or never", s.Access.Anonymous)
	}
	if (s.TLS.Certificate == "") != (s.TLS.Key == "") || (s.TLS.ClientCA != "" && s.TLS.Certificate == "") {
		return errors.New("settings: tls: a certificate needs its key, and client_ca needs both")
	}
	if s.Edge.Hub != "" && (s.Edge.Credentials == "" || s.Broker.URL != "") {
		return errors.New("settings: edge: an edge needs the file of its credentials, and the broker in this process")
	}
	if !off(s.Hub.Listen) && (s.Access.Credentials == "" || s.Broker.URL != "" || s.Hub.CatchUp < 1) {
		return errors.New("settings: hub: a hub needs access: credentials with those of its edges, the broker in this process, and catch_up_readings_per_second above 0")
	}
	for _, l := range []struct{ key, address string }{{"hub: listen", s.Hub.Listen}, {"broker: listen", s.brokerListen()}, {"ways: http", s.Ways.HTTP}, {"ways: mqtt", s.Ways.MQTT}} {
		if off(l.address) {
			continue
		}
		if _, _, err := net.SplitHostPort(l.address); err != nil {
			return fmt.Errorf("settings: %s: %q: %w; write host:port, or none", l.key, l.address, err)
		}
		if s.Access.Credentials == "" && !broker.LoopbackOnly(l.address) {
			return fmt.Errorf("settings: %s: %s is reached from other machines, and anybody could write there; make credentials with fluxwarden credentials new and name their file in access: credentials, or listen on 127.0.0.1",
				l.key, l.address)
		}
	}
	return nil
}

func off(address string) bool { return address == "" || address == "none" }

func (s *Settings) brokerListen() string {
	if s.Broker.URL != "" {
		return "none"
	}
	return s.Broker.Listen
}

func (s *AccessSettings) anonymous() bool {
	return s.Anonymous == "loopback" || (s.Anonymous == "auto" && s.Credentials == "")
}
