package cell

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

func TestGT(t *testing.T) {
	files := strings.Fields(os.Getenv("GT"))
	for _, f := range files {
		b, _ := os.ReadFile(f)
		src := string(b)
		i := strings.Index(src, "\npackage main")
		if i < 0 {
			continue
		}
		src = src[i+1+len("package main"):]
		in, err := New(Options{})
		if err != nil {
			t.Fatal(err)
		}
		s := &session{T: t, in: in}
		ctx, cancel := context.WithTimeout(context.Background(), 8*time.Second)
		fmt.Printf("BEGIN %s\n", filepath.Base(f))
		_, err = s.runContext(ctx, src)
		if err == nil {
			_, err = s.runContext(ctx, "main()")
			if err != nil {
				var e *Error
				errors.As(err, &e)
				fmt.Printf("OUT %s %s\n", s.out.stdout.String(), s.out.stderr.String())
				fmt.Printf("RUNFAIL %s\n%s\n", filepath.Base(f), strings.Join(e.Trace, "\n"))
			} else {
				want, _ := os.ReadFile(strings.TrimSuffix(f, ".go") + ".out")
				got := s.out.stdout.String()
				if got != string(want) {
					if len(got) > 300 {
						got = got[:300]
					}
					fmt.Printf("DIFF %s\n%s\n", filepath.Base(f), got)
				} else {
					fmt.Printf("PASS %s\n", filepath.Base(f))
				}
			}
		} else {
			var e *Error
			errors.As(err, &e)
			tr := e.Trace
			if len(tr) > 3 {
				tr = tr[:3]
			}
			fmt.Printf("COMPILEFAIL %s\n%s\n", filepath.Base(f), strings.Join(tr, "\n"))
		}
		cancel()
	}
}
