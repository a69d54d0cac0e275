//go:build unix

package postgres

import (
	"testing"
	"time"
)

// BenchmarkServer measures a stop and a start, and reports the first start, which initialises the folder.
func BenchmarkServer(b *testing.B) {
	dir := folder(b)
	began := time.Now()
	s, err := Start(b.Context(), Options{Dir: dir})
	if err != nil {
		b.Fatal(err)
	}
	first := time.Since(began)
	for b.Loop() {
		if err := s.Close(); err != nil {
			b.Fatal(err)
		}
		if s, err = Start(b.Context(), Options{Dir: dir}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(first.Milliseconds()), "ms/first-start")
	if err := s.Close(); err != nil {
		b.Fatal(err)
	}
}
