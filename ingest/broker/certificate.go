package broker

import (
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"os"
	"sync"
	"time"
)

// A Certificate is a server's certificate and key in files. A renewed file is taken up with the next connection; one that cannot be
// read changes nothing.
type Certificate struct {
	certFile, keyFile string

	mu     sync.Mutex
	loaded tls.Certificate
	stamp  [2]fileStamp
	looked time.Time
}

const lookAtFilesEvery = time.Second

// TLSFiles name a server's certificate. An empty Certificate means no TLS.
type TLSFiles struct {
	Certificate string // PEM, with the chain behind it
	Key         string // PEM
	ClientCA    string // PEM; clients must show a certificate of one of these. Optional
}

// ServerTLS reads the files. A certificate that has expired, or does not hold yet, is refused: no client would take it.
func ServerTLS(f TLSFiles, now time.Time) (*tls.Config, *Certificate, error) {
	c := &Certificate{certFile: f.Certificate, keyFile: f.Key}
	if err := c.load(); err != nil {
		return nil, nil, err
	}
	leaf := c.loaded.Leaf
	if now.After(leaf.NotAfter) || now.Before(leaf.NotBefore) {
		return nil, nil, fmt.Errorf("tls: %s: it holds from %s to %s, and now is %s: renew it, or set the clock", f.Certificate,
			leaf.NotBefore.Format(time.RFC3339), leaf.NotAfter.Format(time.RFC3339), now.UTC().Format(time.RFC3339))
	}
	config := &tls.Config{MinVersion: tls.VersionTLS12, GetCertificate: func(*tls.ClientHelloInfo) (*tls.Certificate, error) { return c.current(), nil }}
	if f.ClientCA != "" {
		pool, err := certPool(f.ClientCA)
		if err != nil {
			return nil, nil, err
		}
		config.ClientCAs, config.ClientAuth = pool, tls.RequireAndVerifyClientCert
	}
	return config, c, nil
}

// ClientTLS is for a connection to a server whose certificate is signed by an authority of one's own; without a file, by one that
// the system knows. A client's certificate of its own is optional.
func ClientTLS(caFile, certFile, keyFile string) (*tls.Config, error) {
	config := &tls.Config{MinVersion: tls.VersionTLS12}
	if caFile != "" {
		pool, err := certPool(caFile)
		if err != nil {
			return nil, err
		}
		config.RootCAs = pool
	}
	if certFile != "" {
		pair, err := tls.LoadX509KeyPair(certFile, keyFile)
		if err != nil {
			return nil, fmt.Errorf("tls: %s: %w", certFile, err)
		}
		config.Certificates = []tls.Certificate{pair}
	}
	return config, nil
}

func certPool(path string) (*x509.CertPool, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("tls: %w", err)
	}
	pool := x509.NewCertPool()
	if !pool.AppendCertsFromPEM(text) {
		return nil, fmt.Errorf("tls: %s: no certificate in it; it is a PEM file", path)
	}
	return pool, nil
}

func (c *Certificate) load() error {
	pair, err := tls.LoadX509KeyPair(c.certFile, c.keyFile)
	if err != nil {
		return fmt.Errorf("tls: certificate %s, key %s: %w", c.certFile, c.keyFile, err)
	}
	if pair.Leaf == nil {
		return errors.New("tls: " + c.certFile + ": no certificate in it")
	}
	c.loaded, c.stamp = pair, c.stamps()
	return nil
}

func (c *Certificate) stamps() (s [2]fileStamp) {
	for i, name := range []string{c.certFile, c.keyFile} {
		if info, err := os.Stat(name); err == nil {
			s[i] = fileStamp{info.ModTime(), info.Size()}
		}
	}
	return s
}

func (c *Certificate) current() *tls.Certificate {
	c.mu.Lock()
	defer c.mu.Unlock()
	if now := time.Now(); now.Sub(c.looked) > lookAtFilesEvery {
		c.looked = now
		if c.stamps() != c.stamp {
			_ = c.load() // half written: tried again with the next connection
		}
	}
	pair := c.loaded
	return &pair
}

// NotAfter is when the certificate in use expires.
func (c *Certificate) NotAfter() time.Time { return c.current().Leaf.NotAfter }
