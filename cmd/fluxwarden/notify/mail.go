package notify

import (
	"context"
	"crypto/sha256"
	"crypto/tls"
	"encoding/hex"
	"errors"
	"fmt"
	"mime"
	"mime/quotedprintable"
	"net"
	"net/smtp"
	"net/textproto"
	"strings"
	"time"
)

// A Mail sends each message as a mail to all recipients. It uses TLS where the server offers it, and gives a password only then or on
// this machine.
type Mail struct {
	Server         string // host:port
	From           string
	To             []string
	User, Password string
	Now            func() time.Time
	TLS            *tls.Config // nil is the system's
}

// Name implements Way.
func (m *Mail) Name() string { return "mail" }

// Send implements Way.
func (m *Mail) Send(ctx context.Context, msg *Message) error {
	err := m.send(ctx, msg)
	var refused *textproto.Error
	if errors.As(err, &refused) && refused.Code >= 500 {
		return &Final{fmt.Errorf("mail server %s refuses: %w", m.Server, err)}
	}
	if err != nil {
		return fmt.Errorf("mail server %s: %w", m.Server, err)
	}
	return nil
}

func (m *Mail) send(ctx context.Context, msg *Message) error {
	host, _, err := net.SplitHostPort(m.Server)
	if err != nil {
		return err
	}
	var d net.Dialer
	conn, err := d.DialContext(ctx, "tcp", m.Server)
	if err != nil {
		return err
	}
	defer conn.Close()
	if end, ok := ctx.Deadline(); ok {
		_ = conn.SetDeadline(end)
	}
	stop := context.AfterFunc(ctx, func() { conn.Close() })
	defer stop()
	c, err := smtp.NewClient(conn, host)
	if err != nil {
		return err
	}
	if ok, _ := c.Extension("STARTTLS"); ok {
		conf := &tls.Config{ServerName: host}
		if m.TLS != nil {
			conf = m.TLS.Clone()
			conf.ServerName = host
		}
		if err := c.StartTLS(conf); err != nil {
			return err
		}
	}
	if m.User != "" {
		if err := c.Auth(smtp.PlainAuth("", m.User, m.Password, host)); err != nil {
			return err
		}
	}
	if err := c.Mail(m.From); err != nil {
		return err
	}
	for _, to := range m.To {
		if err := c.Rcpt(to); err != nil {
			return err
		}
	}
	w, err := c.Data()
	if err != nil {
		return err
	}
	if _, err := w.Write(m.text(msg)); err != nil {
		return err
	}
	if err := w.Close(); err != nil {
		return err
	}
	_ = c.Quit() // it has been taken; how the server says good-bye is no matter
	return nil
}

// text is the whole mail (RFC 5322). Its Message-ID is made from the key, so that a repeat can be told from a second message.
func (m *Mail) text(msg *Message) []byte {
	sum := sha256.Sum256([]byte(msg.Network + "\n" + msg.Key + "\n" + msg.Event))
	_, domain, _ := strings.Cut(m.From, "@")
	var b strings.Builder
	for _, h := range [][2]string{{"From", m.From}, {"To", strings.Join(m.To, ", ")}, {"Subject", mime.QEncoding.Encode("utf-8", oneLine(msg.Subject))},
		{"Date", m.Now().UTC().Format(time.RFC1123Z)}, {"Message-ID", "<" + hex.EncodeToString(sum[:16]) + "@" + domain + ">"}, {"Auto-Submitted", "auto-generated"},
		{"MIME-Version", "1.0"}, {"Content-Type", "text/plain; charset=utf-8"}, {"Content-Transfer-Encoding", "quoted-printable"}} {
		fmt.Fprintf(&b, "%s: %s\r\n", h[0], h[1])
	}
	b.WriteString("\r\n")
	q := quotedprintable.NewWriter(&b)
	_, _ = q.Write([]byte(strings.ReplaceAll(msg.Text, "\n", "\r\n")))
	_ = q.Close()
	return []byte(b.String())
}

// oneLine keeps a name with a line break in it from adding headers.
func oneLine(s string) string { return strings.NewReplacer("\r", " ", "\n", " ").Replace(s) }
