package notify

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
)

// A Webhook posts each message as JSON.
type Webhook struct {
	URL    string
	Token  string // sent as a bearer token where it is not empty
	client *http.Client
}

// NewWebhook makes one. It follows no redirects: a message with its token goes where it was told to, or nowhere.
func NewWebhook(url, token string) *Webhook {
	return &Webhook{URL: url, Token: token, client: &http.Client{
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse },
		Transport:     &http.Transport{Proxy: http.ProxyFromEnvironment, MaxIdleConns: 2}}}
}

// Name implements Way.
func (w *Webhook) Name() string { return "webhook" }

// answerMax is how much of an answer is read.
const answerMax = 64 << 10

// Send implements Way.
func (w *Webhook) Send(ctx context.Context, m *Message) error {
	text, err := json.Marshal(m)
	if err != nil {
		return &Final{err}
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, w.URL, bytes.NewReader(text))
	if err != nil {
		return &Final{fmt.Errorf("webhook %s: %w", w.URL, err)}
	}
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set("Idempotency-Key", m.Key)
	if w.Token != "" {
		req.Header.Set("Authorization", "Bearer "+w.Token)
	}
	resp, err := w.client.Do(req)
	if err != nil {
		return fmt.Errorf("webhook: %w", err)
	}
	defer resp.Body.Close()
	_, _ = io.Copy(io.Discard, io.LimitReader(resp.Body, answerMax))
	switch {
	case resp.StatusCode/100 == 2:
		return nil
	case resp.StatusCode/100 == 3:
		return &Final{fmt.Errorf("webhook %s: it redirects to %s; give that address in the settings (notify: webhook: url) if it is right", w.URL, resp.Header.Get("Location"))}
	case resp.StatusCode == http.StatusRequestTimeout || resp.StatusCode == http.StatusTooManyRequests || resp.StatusCode/100 == 5:
		return fmt.Errorf("webhook %s: %s", w.URL, resp.Status)
	}
	return &Final{fmt.Errorf("webhook %s: %s", w.URL, resp.Status)}
}
