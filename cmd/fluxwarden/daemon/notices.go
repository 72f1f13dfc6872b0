package daemon

import (
	"context"
	"errors"
	"fmt"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"time"

	"fluxwarden/cmd/fluxwarden/notify"
)

// NotifySettings say whom the daemon tells of faults by itself. Without a webhook and a mail server it tells nobody.
type NotifySettings struct {
	Webhook WebhookSettings `yaml:"webhook"`
	Mail    MailSettings    `yaml:"mail"`
	Quiet   string          `yaml:"quiet"`   // hours in which nothing goes out, 22:00-06:00; empty for none
	Morning string          `yaml:"morning"` // time of the daily sheet, 07:00; empty for none
	Zone    string          `yaml:"zone"`    // of these times, such as UTC or Europe/Oslo
	Sent    string          `yaml:"sent"`    // file that keeps what was sent
}

// WebhookSettings name where messages are posted as JSON.
type WebhookSettings struct {
	URL   string `yaml:"url"`
	Token string `yaml:"token"` // file with a bearer token, or the name of a service credential; empty for none
}

// MailSettings name the mail server and whom to write to.
type MailSettings struct {
	Server   string `yaml:"server"` // host:port
	From     string `yaml:"from"`
	To       string `yaml:"to"` // one or more addresses, with commas between
	User     string `yaml:"user"`
	Password string `yaml:"password"` // file with the password, or the name of a service credential
}

func (n *NotifySettings) off() bool { return n.Webhook.URL == "" && n.Mail.Server == "" }

// check says what is wrong, without reading secrets.
func (n *NotifySettings) check() error {
	if n.off() {
		return nil
	}
	if _, _, err := n.hours(); err != nil {
		return err
	}
	if n.Sent == "" {
		return errors.New("settings: notify: sent: empty; name a file that keeps what was sent")
	}
	if u := n.Webhook.URL; u != "" {
		if p, err := url.Parse(u); err != nil || p.Host == "" || (p.Scheme != "http" && p.Scheme != "https") {
			return fmt.Errorf("settings: notify: webhook: url: %q is not an address; write http:// or https:// and a host", u)
		}
	}
	if m := &n.Mail; m.Server != "" {
		if _, _, err := net.SplitHostPort(m.Server); err != nil {
			return fmt.Errorf("settings: notify: mail: server: %q: %w; write host:port, such as localhost:25", m.Server, err)
		}
		if !strings.Contains(m.From, "@") || !strings.Contains(m.To, "@") || strings.ContainsAny(m.From+m.To, "\r\n") {
			return errors.New("settings: notify: mail: give from and to as mail addresses")
		}
	}
	return nil
}

// hours reads quiet hours and the time of the morning sheet.
func (n *NotifySettings) hours() (q notify.Quiet, m notify.Morning, err error) {
	zone, err := time.LoadLocation(n.Zone)
	if err != nil {
		return q, m, fmt.Errorf("settings: notify: zone: %q is not known; write UTC or a name such as Europe/Oslo", n.Zone)
	}
	if n.Quiet != "" {
		from, to, found := strings.Cut(n.Quiet, "-")
		q.Zone = zone
		if q.From, err = notify.ParseHour(strings.TrimSpace(from)); err == nil {
			q.To, err = notify.ParseHour(strings.TrimSpace(to))
		}
		if err != nil || !found {
			return q, m, fmt.Errorf("settings: notify: quiet: %q: write two times of day, such as 22:00-06:00", n.Quiet)
		}
	}
	if n.Morning != "" {
		m.Zone = zone
		if m.At, err = notify.ParseHour(n.Morning); err != nil {
			return q, m, fmt.Errorf("settings: notify: morning: %w", err)
		}
	}
	return q, m, nil
}

// secret reads a file, or a credential that the service manager has handed in.
func secret(name, key string) (string, error) {
	if name == "" {
		return "", nil
	}
	path := name
	if dir := os.Getenv("CREDENTIALS_DIRECTORY"); dir != "" && !filepath.IsAbs(name) {
		path = filepath.Join(dir, name)
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return "", fmt.Errorf("settings: notify: %s: %w; give a file's path, or hand it in with LoadCredential=%s:PATH", key, err, name)
	}
	return strings.TrimSpace(string(text)), nil
}

// openNotifier begins to tell of faults, if there is somebody to tell.
func (d *Daemon) openNotifier(context.Context) error {
	s := &d.config.Settings.Notify
	if s.off() {
		return nil
	}
	quiet, morning, err := s.hours()
	if err != nil {
		return &Unusable{err}
	}
	c := notify.Config{Network: d.config.Site.Network.Name, LogFile: s.Sent, Quiet: quiet, Morning: morning, Now: d.config.Clock.Now, CaughtUp: d.caughtUp.Load,
		Sheet: d.sheet, Meter: d.metrics, Log: d.log, Settle: notify.SettleDefault}
	if s.Webhook.URL != "" {
		token, err := secret(s.Webhook.Token, "webhook: token")
		if err != nil {
			return &Unusable{err}
		}
		c.Ways = append(c.Ways, notify.NewWebhook(s.Webhook.URL, token))
	}
	if m := &s.Mail; m.Server != "" {
		password, err := secret(m.Password, "mail: password")
		if err != nil {
			return &Unusable{err}
		}
		var to []string
		for _, a := range strings.Split(m.To, ",") {
			to = append(to, strings.TrimSpace(a))
		}
		c.Ways = append(c.Ways, &notify.Mail{Server: m.Server, From: m.From, To: to, User: m.User, Password: password, Now: d.config.Clock.Now})
	}
	if err := os.MkdirAll(filepath.Dir(s.Sent), 0o755); err != nil {
		return &Unusable{fmt.Errorf("settings: notify: sent: %w", err)}
	}
	n, err := notify.Start(c)
	if err != nil {
		return &Unusable{err}
	}
	d.hub.notify.Store(n)
	return nil
}

// sheet is the text of the morning sheet.
func (d *Daemon) sheet() string {
	var b strings.Builder
	if why := d.NotReady(); why != "" {
		fmt.Fprintf(&b, "Readings are not taken: %s.\n\n", why)
	}
	if n := d.hub.notify.Load(); n != nil {
		b.WriteString(n.Summary())
	}
	return b.String()
}
