package main

import (
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/mattn/go-isatty"
)

func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && isatty.IsTerminal(f.Fd())
}

// progress draws how far long work is, where somebody looks at a terminal; elsewhere it does nothing.
func (s *streams) progress(what string) func(done, total int) {
	if !s.terminal {
		return nil
	}
	const width = 30
	last := -1
	return func(done, total int) {
		part := 1000
		if total > 0 {
			part = done * 1000 / total
		}
		if part == last {
			return
		}
		last = part
		filled := width * part / 1000
		fmt.Fprintf(s.err, "\r%s [%s%s] %d of %d", what, strings.Repeat("#", filled), strings.Repeat("-", width-filled), done, total)
		if done >= total {
			fmt.Fprintln(s.err)
		}
	}
}

// counted writes a number and what it counts: "1 place", "3 places".
func counted(n int, what string) string {
	if n != 1 {
		what += "s"
	}
	return fmt.Sprintf("%d %s", n, what)
}
