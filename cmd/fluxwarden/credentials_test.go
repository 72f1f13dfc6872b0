package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fluxwarden/ingest/broker"
)

func TestCredentials(t *testing.T) {
	dir := t.TempDir()
	file, out := filepath.Join(dir, "credentials.yaml"), filepath.Join(dir, "secret")
	for i, c := range []struct {
		args string
		code int
	}{
		{"new --file F --station northmoor --out S", exitOK},
		{"new --file F --station northmoor --out S", exitProblem}, // the secret's file is there already
		{"new --file F --role operator --kind nkey --name desk", exitOK},
		{"new --file F --name desk --station northmoor", exitProblem},
		{"new --file F --role king", exitProblem},
		{"list --file F", exitOK},
		{"revoke --file F northmoor-1", exitOK},
		{"revoke --file F northmoor-1", exitProblem},
		{"revoke --file F", exitUsage},
		{"list", exitUsage},
		{"burn --file F", exitUsage},
	} {
		args := strings.Fields(strings.NewReplacer("F", file, "S", out).Replace(c.args))
		if code := cmdCredentials(args); code != c.code {
			t.Fatalf("case %d: %s: exit code %d, want %d", i, c.args, code, c.code)
		}
	}
	book, err := broker.ReadBook(file)
	if err != nil || len(book.Credentials) != 2 || book.Credentials[0].Revoked.IsZero() {
		t.Fatalf("%+v, %v", book, err)
	}
	secret, err := broker.ReadSecret(out)
	if err != nil || secret.Name != "northmoor-1" || secret.Station != "northmoor" {
		t.Fatal(secret.Name, err)
	}
	for _, f := range []string{file, out} {
		if info, err := os.Stat(f); err != nil || info.Mode().Perm() != 0o600 {
			t.Error(f, info.Mode(), err)
		}
	}
	if text, _ := os.ReadFile(file); strings.Contains(string(text), secret.Password) {
		t.Error("the secret itself is in the book")
	}
}
