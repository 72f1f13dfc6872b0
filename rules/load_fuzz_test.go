package rules

import (
	"errors"
	"os"
	"strings"
	"testing"
)

// FuzzParse: no text makes the reader panic or answer without bound, and each refusal says where and how to mend it.
func FuzzParse(f *testing.F) {
	for _, file := range append(goodFiles(f), badFiles(f)...) {
		text, err := os.ReadFile(file)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > 64<<10 {
			return
		}
		site, err := Parse("x.yaml", text)
		if err == nil {
			if again, err := Parse("y.yaml", text); err != nil || again.Digest != site.Digest || len(site.Digest) != 64 {
				t.Fatalf("the same text reads two ways: %v", err)
			}
			return
		}
		var problems Problems
		if !errors.As(err, &problems) || len(problems) == 0 || len(problems) > problemsMax {
			t.Fatalf("the error is %T with %d problems", err, len(problems))
		}
		for _, p := range problems {
			if p.What == "" || p.Mend == "" || strings.ContainsAny(p.String(), "\r\n") || len(p.String()) > 2000 {
				t.Fatalf("not one clear line: %q", p.String())
			}
		}
	})
}
