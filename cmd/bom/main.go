// Command bom writes the bill of materials of a built binary as CycloneDX 1.5, and the licences of all that is in it as text. It reads what the
// linker wrote into the binary, so it cannot name what is not there.
package main

import (
	"bytes"
	"crypto/sha256"
	"debug/buildinfo"
	"encoding/base64"
	"encoding/hex"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime/debug"
	"slices"
	"strings"
)

func main() {
	binary := flag.String("binary", "", "the built `file`")
	version := flag.String("version", "", "of the release")
	licences := flag.String("licences", "", "`file` for the licence texts")
	flag.Parse()
	if err := run(*binary, *version, *licences); err != nil {
		fmt.Fprintln(os.Stderr, "bom:", err)
		os.Exit(1)
	}
}

// A component is a CycloneDX component.
type component struct {
	Type     string    `json:"type"`
	Ref      string    `json:"bom-ref"`
	Name     string    `json:"name"`
	Version  string    `json:"version"`
	Hashes   []hash    `json:"hashes,omitempty"`
	Licences []licence `json:"licenses,omitempty"`
	Purl     string    `json:"purl,omitempty"`
}

type hash struct {
	Alg     string `json:"alg"`
	Content string `json:"content"`
}

type licence struct {
	Licence struct {
		ID string `json:"id"`
	} `json:"license"`
}

func licenceOf(id string) []licence {
	var l licence
	l.Licence.ID = id
	return []licence{l}
}

// A bill is a CycloneDX document. It has no time and no random number: the same binary gives the same bytes.
type bill struct {
	Format   string `json:"bomFormat"`
	Spec     string `json:"specVersion"`
	Serial   string `json:"serialNumber"`
	Version  int    `json:"version"`
	Metadata struct {
		Component component `json:"component"`
	} `json:"metadata"`
	Components []component `json:"components"`
}

func run(binary, version, licences string) error {
	info, err := buildinfo.ReadFile(binary)
	if err != nil {
		return fmt.Errorf("%s: %w", binary, err)
	}
	body, err := os.ReadFile(binary)
	if err != nil {
		return err
	}
	sum := sha256.Sum256(body)
	b := bill{Format: "CycloneDX", Spec: "1.5", Version: 1, Components: []component{}}
	b.Serial = fmt.Sprintf("urn:uuid:%x-%x-5%x-8%x-%x", sum[0:4], sum[4:6], sum[6:8], sum[8:10], sum[10:16])
	b.Serial = strings.ToLower(trimUUID(b.Serial))
	b.Metadata.Component = component{Type: "application", Ref: info.Main.Path, Name: info.Main.Path, Version: version, Licences: licenceOf("Apache-2.0"),
		Hashes: []hash{{"SHA-256", hex.EncodeToString(sum[:])}}}
	var texts bytes.Buffer
	root, err := exec.Command("go", "env", "GOROOT").Output()
	if err != nil {
		return fmt.Errorf("go env GOROOT: %w", err)
	}
	goText, err := os.ReadFile(filepath.Join(strings.TrimSpace(string(root)), "LICENSE"))
	if err != nil {
		return fmt.Errorf("licence of the standard library: %w", err)
	}
	fmt.Fprintf(&texts, "%s\nThe Go standard library, %s: BSD-3-Clause\n\n%s\n", rule, info.GoVersion, goText)
	b.Components = append(b.Components, component{Type: "library", Ref: "std", Name: "std", Version: strings.TrimPrefix(info.GoVersion, "go"),
		Licences: licenceOf("BSD-3-Clause"), Purl: "pkg:golang/std@" + strings.TrimPrefix(info.GoVersion, "go")})
	deps := slices.Clone(info.Deps)
	slices.SortFunc(deps, func(a, b *debug.Module) int { return strings.Compare(a.Path, b.Path) })
	for _, m := range deps {
		if m.Replace != nil {
			m = m.Replace
		}
		id, text, err := licenceIn(m)
		if err != nil {
			return err
		}
		fmt.Fprintf(&texts, "%s\n%s %s: %s\n\n%s\n", rule, m.Path, m.Version, id, text)
		c := component{Type: "library", Ref: m.Path, Name: m.Path, Version: m.Version, Licences: licenceOf(id), Purl: "pkg:golang/" + m.Path + "@" + m.Version}
		if h, ok := strings.CutPrefix(m.Sum, "h1:"); ok { // of the module's files, as go.sum has it
			if raw, err := base64.StdEncoding.DecodeString(h); err == nil {
				c.Hashes = []hash{{"SHA-256", hex.EncodeToString(raw)}}
			}
		}
		b.Components = append(b.Components, c)
	}
	if licences != "" {
		if err := os.WriteFile(licences, texts.Bytes(), 0o644); err != nil {
			return err
		}
	}
	out := json.NewEncoder(os.Stdout)
	out.SetIndent("", "  ")
	return out.Encode(b)
}

const rule = "================================================================"

// trimUUID brings the groups to the lengths 8-4-4-4-12.
func trimUUID(urn string) string {
	groups := strings.Split(strings.TrimPrefix(urn, "urn:uuid:"), "-")
	for i, n := range []int{8, 4, 4, 4, 12} {
		groups[i] = groups[i][:n]
	}
	return "urn:uuid:" + strings.Join(groups, "-")
}

// licenceIn finds the licence of a module in its own folder.
func licenceIn(m *debug.Module) (id, text string, err error) {
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}", m.Path).Output()
	if err != nil {
		return "", "", fmt.Errorf("module %s: %w", m.Path, err)
	}
	dir := strings.TrimSpace(string(out))
	for _, pattern := range []string{"LICENSE*", "LICENCE*", "COPYING*", "License*"} {
		names, _ := filepath.Glob(filepath.Join(dir, pattern))
		for _, name := range names {
			body, err := os.ReadFile(name)
			if err != nil {
				continue
			}
			if id := identify(string(body)); id != "" {
				return id, string(body), nil
			}
		}
	}
	return "", "", errors.New("module " + m.Path + ": no licence that is known in " + dir + "; add its marks to identify")
}

// identify tells a licence by words that only it has (SPDX identifiers).
func identify(text string) string {
	has := func(words ...string) bool {
		flat := strings.Join(strings.Fields(text), " ")
		for _, w := range words {
			if !strings.Contains(flat, w) {
				return false
			}
		}
		return true
	}
	switch {
	case has("Apache License", "Version 2.0, January 2004"):
		return "Apache-2.0"
	case has("Mozilla Public License", "2.0"):
		return "MPL-2.0"
	case has("Redistribution and use in source and binary forms", "Neither the name"), has("Redistribution and use in source and binary forms", "names of its contributors"),
		has("Redistribution and use in source and binary forms", "name of the author may not"):
		return "BSD-3-Clause"
	case has("Redistribution and use in source and binary forms"):
		return "BSD-2-Clause"
	case has("Permission is hereby granted, free of charge"):
		return "MIT"
	case has("Permission to use, copy, modify, and/or distribute this software for any purpose"):
		return "ISC"
	}
	return ""
}
