package api

import (
	"bytes"
	"io"
	"testing"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
	"github.com/prometheus/client_golang/prometheus"
)

func freshRegistry(b *bench) *prometheus.Registry {
	b.reg = prometheus.NewRegistry()
	return b.reg
}

func packed(t testing.TB, data []byte, coding string) []byte {
	t.Helper()
	var b bytes.Buffer
	var w io.WriteCloser
	switch coding {
	case "gzip":
		w = gzip.NewWriter(&b)
	case "zstd":
		var err error
		if w, err = zstd.NewWriter(&b); err != nil {
			t.Fatal(err)
		}
	default:
		return data
	}
	if _, err := w.Write(data); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func unpacked(t testing.TB, data []byte, coding string) []byte {
	t.Helper()
	var r io.Reader = bytes.NewReader(data)
	switch coding {
	case "gzip":
		z, err := gzip.NewReader(r)
		if err != nil {
			t.Fatal(err)
		}
		r = z
	case "zstd":
		z, err := zstd.NewReader(r)
		if err != nil {
			t.Fatal(err)
		}
		defer z.Close()
		r = z
	}
	out, err := io.ReadAll(r)
	if err != nil {
		t.Fatal(err)
	}
	return out
}
