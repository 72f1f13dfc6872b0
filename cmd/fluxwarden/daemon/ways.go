package daemon

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"sync"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/field"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/rules"
)

// ways are the ways in beside NATS, and what all of them share.
type ways struct {
	metrics     *metrics.Field
	tls         *tls.Config
	certificate *broker.Certificate
	http        *http.Server
	httpAddress string
	mqtt        *field.MQTT
	mqttListen  net.Listener

	followers sync.WaitGroup
	followMu  sync.Mutex
	stopped   bool
	unfollow  context.CancelFunc // ends followers and pollers; nil while there are none
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
func (d *Daemon) accessChanged() {
	if d.ways.mqtt != nil {
		d.ways.mqtt.Check()
	}
}

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
	if !off(s.MQTT) {
		l, err := d.listenFor("ways: mqtt", s.MQTT)
		if err != nil {
			return err
		}
		d.ways.mqttListen = l
		if d.ways.tls != nil {
			l = tls.NewListener(l, d.ways.tls)
		}
		d.ways.mqtt = field.NewMQTT(field.MQTTSettings{Door: d, Guard: d.access, Refuse: d.refuse, Log: d.log})
		d.done.Go(func() {
			if err := d.ways.mqtt.Serve(l); err != nil {
				d.metrics.Failed("mqtt")
				d.log.Error("readings are no longer taken by MQTT", "cause", err)
			}
		})
	}
	return nil
}

// refuse keeps what a way in could not read, in the stream REFUSED, and counts it.
func (d *Daemon) refuse(ctx context.Context, station string, reason wire.Reason, detail string, count int, payload []byte) error {
	d.metrics.Gate().Refused(reason, count)
	return aside{d.broker, d.config.Clock.Now}.SetAside(ctx, string(reason), station, nil, payload, detail)
}

// follow begins to follow the files and to ask the devices that the site file names, in place of those before.
func (d *Daemon) follow(site *rules.Site) {
	w := &d.ways
	w.followMu.Lock()
	defer w.followMu.Unlock()
	w.stopFollowing()
	if w.stopped {
		return
	}
	ctx, cancel := context.WithCancel(context.Background())
	w.unfollow = cancel
	for i := range site.Stations {
		st := &site.Stations[i]
		for k := range st.Files {
			if err := os.MkdirAll(d.config.Settings.Ways.State, 0o750); err != nil {
				d.metrics.Failed("files")
				d.log.Error("followed files: how far they were taken is not kept", "cause", err)
			}
			f := field.NewFollower(field.FileSettings{Station: st.ID, Layout: &st.Files[k], Door: d, Refuse: d.refuse, Log: d.log,
				Places: filepath.Join(d.config.Settings.Ways.State, fmt.Sprintf("%s.files-%d.json", st.ID, k+1))})
			w.followers.Go(func() { f.Run(ctx) })
		}
		if len(st.Modbus) > 0 {
			p := field.NewModbusPoller(field.ModbusSettings{Station: st.ID, Devices: st.Modbus, Door: d, Now: d.config.Clock.Now, Log: d.log,
				Failed: func() { d.metrics.Failed("modbus") }, Lost: func(int) { d.metrics.Failed("modbus_lost") }})
			w.followers.Go(func() { p.Run(ctx) })
		}
	}
}

func (w *ways) stopFollowing() {
	if w.unfollow != nil {
		w.unfollow()
		w.followers.Wait()
		w.unfollow = nil
	}
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

// MQTTAddress is where readings are taken by MQTT; empty if they are not.
func (d *Daemon) MQTTAddress() string {
	if d.ways.mqttListen == nil {
		return ""
	}
	return d.ways.mqttListen.Addr().String()
}

func (w *ways) stop() {
	w.followMu.Lock()
	w.stopFollowing()
	w.stopped = true
	w.followMu.Unlock()
	if w.mqttListen != nil {
		_ = w.mqttListen.Close()
	}
	if w.mqtt != nil {
		w.mqtt.Close()
	}
	if w.http != nil {
		shutdownServer(w.http)
	}
}
