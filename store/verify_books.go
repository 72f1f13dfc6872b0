package store

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"strings"

	"fluxwarden/rules"
	"fluxwarden/store/vfs"
)

// verifyRecords follows the records of a partition that are still there.
func (a *Archive) verifyRecords(i int) []Finding {
	n, err := a.firstRecord(i)
	if err != nil {
		return []Finding{{path.Join("commit", partName(i)), err.Error(), true}}
	}
	if n == 0 {
		return nil
	}
	var found []Finding
	previous := ""
	for ; ; n++ {
		r, hash, err := a.readRecord(i, n)
		if errors.Is(err, fs.ErrNotExist) {
			break
		}
		if err != nil {
			return append(found, Finding{recordPath(i, n), err.Error(), true})
		}
		if previous != "" && r.Previous != previous {
			found = append(found, Finding{recordPath(i, n), "does not follow the record before it: one of the two was changed", true})
		}
		previous = hash
	}
	if err := a.noGap(i, n); err != nil {
		found = append(found, Finding{recordPath(i, n), err.Error(), true})
	}
	p := a.parts[i]
	p.mu.RLock()
	defer p.mu.RUnlock()
	if p.have && n-1 < p.last.Number {
		found = append(found, Finding{recordPath(i, n), fmt.Sprintf("missing: the manifest stands on record %d", p.last.Number), true})
	} else if p.have && n-1 == p.last.Number && previous != p.hash {
		found = append(found, Finding{recordPath(i, n-1), "bytes changed: its sha256 is not the manifest's", true})
	}
	return found
}

// verifyFormat looks at archive.json, whose every byte is known.
func (a *Archive) verifyFormat() []Finding {
	b, err := vfs.ReadFileBytes(a.fs, a.path("archive.json"))
	for version := 1; err == nil && version <= FormatVersion; version++ {
		if bytes.Equal(b, formatText(version)) {
			return nil
		}
	}
	if err == nil {
		err = errors.New("bytes changed since it was written")
	}
	return []Finding{{"archive.json", err.Error(), true}}
}

// verifyRules holds a rule set against its sha256, or where an older program has left none against the digest in its name.
func (a *Archive) verifyRules(name string) []Finding {
	b, err := vfs.ReadFileBytes(a.fs, a.path(name))
	if err != nil {
		return []Finding{{name, fmt.Sprintf("cannot be read: %v", err), true}}
	}
	want, err := vfs.ReadFileBytes(a.fs, a.path(name+".sha256"))
	if err == nil {
		if string(want) != sumLine(name, b) {
			return []Finding{{name, "bytes changed since it was written: its sha256 is not the one in " + name + ".sha256", true}}
		}
		return nil
	}
	digest := strings.TrimSuffix(path.Base(name), ".yaml")
	if s, err := rules.Parse(name, b); err != nil || s.Digest != digest {
		return []Finding{{name, "its rules have not the digest in its name", true}}
	}
	return nil
}

// sumLine is a line that sha256sum -c reads.
func sumLine(name string, b []byte) string { return sha(b) + "  " + path.Base(name) + "\n" }

// noGap errs where records come after a number that has none: what stands in them would never be read.
func (a *Archive) noGap(i int, next uint64) error {
	list, err := a.fs.ReadDir(a.path(path.Join("commit", partName(i))))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, e := range list {
		var n uint64
		if _, err := fmt.Sscanf(e.Name, "%d.json", &n); err != nil || n <= next || path.Base(recordPath(i, n)) != e.Name {
			continue
		}
		if ok, err := vfs.Exists(a.fs, a.path(recordPath(i, next))); ok || err != nil {
			return err // a writer has made it meanwhile
		}
		return fmt.Errorf("archive %s: commit/%s/%s: comes after record %d, which is not there: %s", a.dir, partName(i), e.Name, next, mendBooks(i))
	}
	return nil
}

// mendBooks is what to do about books that cannot be followed.
func mendBooks(i int) string {
	return fmt.Sprintf("restore commit/%02d/ and manifest/%02d.json from a copy, or move both away to have the books built anew from the tree", i, i)
}

// The check sum of a record or a manifest stands at the end of its text, over all that comes before.
const (
	recordCheck   = ",\n \"check\": \""
	manifestCheck = ",\"check\":\""
)

// withCheck gives the text with its check sum at its end; it ends with `end`.
func withCheck(text []byte, mark, end string) []byte {
	body := bytes.TrimSuffix(text, []byte(end))
	return fmt.Appendf(nil, "%s%s%s\"%s", body, mark, sha(text), end)
}

// checkHolds says whether a text is as it was written. One that an older program has written has no check sum; then only its fields are
// looked at.
func checkHolds(text []byte, mark, end string, into any) bool {
	at := bytes.LastIndex(text, []byte(mark))
	if at < 0 {
		d := json.NewDecoder(bytes.NewReader(text))
		d.DisallowUnknownFields()
		return d.Decode(into) == nil
	}
	whole := append(bytes.Clone(text[:at]), end...)
	return bytes.Equal(withCheck(whole, mark, end), text)
}
