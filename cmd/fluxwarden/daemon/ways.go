package daemon

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"net"
	"net/http"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/field"
	"fluxwarden/ingest/gate"
)

// ways are the ways in beside NATS, and what all of them share.
type ways struct {
	metrics     *metrics.Field
	tls         *tls.Config
	certificate *broker.Certificate
	http        *http.Server
	httpAddress string
}

// openAccess reads credentials and certificate.
func (d *Daemon) openAccess(context.Context) error {
	s := &d.config.Settings
	d.ways.metrics = d.metrics.NewField()
	var err error
	d.access, err = broker.OpenAccess(broker.AccessSettings{Book: s.Access.Credentials, Anonymous: s.Access.anonymous(),
		Refused: d.ways.metrics.TurnedAway, Log: d.log})
	if err != nil {
		return &Unusable{err}
	}
	for _, station := range d.access.Stations() {
		if !d.known()(station) {
			d.log.Warn("a credential is for a station that the site file does not have", "station", station)
		}
	}
	if s.TLS.Certificate == "" {
		return nil
	}
	d.ways.tls, d.ways.certificate, err = broker.ServerTLS(broker.TLSFiles{Certificate: s.TLS.Certificate, Key: s.TLS.Key, ClientCA: s.TLS.ClientCA},
		d.config.Clock.Now())
	if err != nil {
		return &Unusable{err}
	}
	d.ways.metrics.CertificateExpires(d.ways.certificate.NotAfter())
	return nil
}

const (
	accessEvery      = time.Second
	certificateEarly = 14 * 24 * time.Hour // so long before its end a certificate is complained about
)

// watchAccess follows the files of credentials and certificate.
func (d *Daemon) watchAccess(ctx context.Context) {
	timer := time.NewTicker(accessEvery)
	defer timer.Stop()
	broken, told := "", false
	for {
		select {
		case <-ctx.Done():
			return
		case <-timer.C:
		}
		changed, err := d.access.Reload()
		switch {
		case err != nil && err.Error() != broken:
			broken = err.Error()
			d.metrics.Failed("credentials")
			d.log.Error("the credentials cannot be read; those in force stay", "cause", err)
		case err == nil && (changed || broken != ""):
			broken = ""
			d.log.Info("credentials read again")
			d.accessChanged()
		}
		if d.ways.certificate == nil {
			continue
		}
		end := d.ways.certificate.NotAfter()
		d.ways.metrics.CertificateExpires(end)
		if soon := time.Until(end) < certificateEarly; soon != told {
			if told = soon; soon {
				d.log.Warn("the certificate expires soon; put a renewed one in its place", "expires", end)
			}
		}
	}
}

// accessChanged is called after the credentials were read again.
func (d *Daemon) accessChanged() {}

// openWays opens the listeners of the other ways in. What comes before the gate is there is asked to come again.
func (d *Daemon) openWays(context.Context) error {
	s := &d.config.Settings.Ways
	if !off(s.HTTP) {
		l, err := d.listenFor("ways: http", s.HTTP)
		if err != nil {
			return err
		}
		d.ways.httpAddress = l.Addr().String()
		if d.ways.tls != nil {
			l = tls.NewListener(l, d.ways.tls)
		}
		d.ways.http = field.NewHTTPServer(d, d.access, d.log)
		d.done.Go(func() {
			if err := d.ways.http.Serve(l); err != nil && !errors.Is(err, http.ErrServerClosed) {
				d.metrics.Failed("http")
				d.log.Error("readings are no longer taken by HTTP", "cause", err)
			}
		})
	}
	return nil
}

func (d *Daemon) listenFor(key, address string) (net.Listener, error) {
	l, err := net.Listen("tcp", address)
	if errors.Is(err, syscall.EADDRINUSE) {
		return nil, fmt.Errorf("settings: %s: %s: the port is in use; stop the program that has it, or give another", key, address)
	}
	if err != nil {
		return nil, &Unusable{fmt.Errorf("settings: %s: %s: %w", key, address, err)}
	}
	return l, nil
}

// Take implements field.Door: the gate, once it is open.
func (d *Daemon) Take(ctx context.Context, station string, payload []byte) (field.Answer, error) {
	g := d.gate.Load()
	if g == nil {
		return field.Answer{Retry: true, Reason: string(gate.BrokerAway)}, nil
	}
	r, err := g.Take(ctx, station, payload)
	if err != nil {
		return field.Answer{}, err
	}
	a := field.Answer{OK: r.OK, N: r.N, Retry: r.Retry, Reason: string(r.Reason), More: r.More}
	for _, f := range r.Refused {
		a.Refused = append(a.Refused, field.Refused{Index: f.Index, Reason: string(f.Reason), Detail: f.Detail})
	}
	return a, nil
}

// HTTPAddress is where readings are taken by HTTP; empty if they are not.
func (d *Daemon) HTTPAddress() string { return d.ways.httpAddress }

func (w *ways) stop() {
	if w.http != nil {
		shutdownServer(w.http)
	}
}
