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
	for _, l := range []struct{ key, address string }{{"broker: listen", s.brokerListen()}, {"ways: http", s.Ways.HTTP}, {"ways: mqtt", s.Ways.MQTT}} {
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
