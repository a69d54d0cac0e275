package api

import (
	"bytes"
	"encoding/json"
	"io"
	"net/http"
	"strconv"
	"strings"
	"sync"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// reply is what a handler answers. The zero reply is 200 without a body.
type reply struct {
	status  int         // 200 where 0
	version int64       // the ETag, where above 0
	header  [][2]string // Location, Link and the like
	media   string      // of raw or stream; JSON where empty
	body    any         // marshalled as JSON, unless raw is set
	raw     []byte      // as it stands

	// stream writes the body piece by piece, where it is too large to hold. A failure after the first piece can
	// only be told by cutting the connection.
	stream func(io.Writer) error
	// serve hands the whole answer to another handler: metrics and assets.
	serve http.Handler
}

// encode marshals the body, once.
func (r *reply) encode() error {
	if r.body == nil || r.raw != nil {
		return nil
	}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(r.body); err != nil {
		return err
	}
	r.raw, r.body = b.Bytes(), nil
	return nil
}

const (
	// smallest is the size below which compressing costs more than it saves: one packet.
	smallest = 1400
	// writePause is how long a receiver of a stream may take for one piece.
	writePause = 30 * time.Second
)

// Header values that never change are shared between answers.
var (
	jsonValue    = []string{jsonMedia}
	nosniff      = []string{"nosniff"}
	noReferrer   = []string{"no-referrer"}
	noContent    = []string{"default-src 'none'; frame-ancestors 'none'"}
	revalidate   = []string{"private, no-cache"}
	noStore      = []string{"no-store"}
	varyCoding   = []string{"Accept-Encoding"}
	varyBoth     = []string{"Accept, Accept-Encoding"}
	gzipValue    = []string{"gzip"}
	zstdValue    = []string{"zstd"}
	securityOnly = []string{"max-age=31536000"}
)

// secure sets the headers that every answer carries.
func secure(h http.Header, r *http.Request) {
	h["X-Content-Type-Options"] = nosniff
	h["Referrer-Policy"] = noReferrer
	h["Content-Security-Policy"] = noContent
	if r.TLS != nil {
		h["Strict-Transport-Security"] = securityOnly
	}
}

// send writes r as the answer to c. The error is of a stream that broke, after the status was sent.
func (c *call) send(r *reply) error {
	h := c.w.Header()
	for _, kv := range r.header {
		c.set(kv[0], kv[1])
	}
	if r.serve != nil {
		r.serve.ServeHTTP(c.w, c.r)
		return nil
	}
	if r.status == 0 {
		r.status = http.StatusOK
	}
	tag := ""
	if r.version > 0 {
		tag = etag(r.version)
	}
	if h["Cache-Control"] == nil {
		h["Cache-Control"] = revalidate
		if r.status >= 400 {
			h["Cache-Control"] = noStore
		}
	}
	h["Vary"] = varyCoding
	if c.route != nil && len(c.route.Gives) > 1 {
		h["Vary"] = varyBoth
	}
	if r.status == http.StatusNotModified || r.raw == nil && r.stream == nil {
		if tag != "" {
			c.set("Etag", tag)
		}
		c.w.WriteHeader(r.status)
		c.w.WriteHeaderNow()
		return nil
	}
	if r.media == "" {
		h["Content-Type"] = jsonValue
	} else {
		c.set("Content-Type", r.media)
	}
	code := ""
	if (r.stream != nil || len(r.raw) >= smallest) && !strings.HasPrefix(r.media, "text/event-stream") {
		code = coding(c.r)
	}
	if tag != "" {
		if code != "" { // another representation needs another strong tag (RFC 9110 section 8.8.3.3)
			tag = tag[:len(tag)-1] + "-" + code + `"`
		}
		c.set("Etag", tag)
	}
	switch code {
	case "gzip":
		h["Content-Encoding"] = gzipValue
	case "zstd":
		h["Content-Encoding"] = zstdValue
	}
	if r.stream != nil {
		c.w.WriteHeader(r.status)
		c.w.WriteHeaderNow()
		if c.r.Method == http.MethodHead {
			return nil
		}
		return c.pour(r.stream, code)
	}
	raw := r.raw
	switch code {
	case "gzip":
		raw = gzipped(raw)
	case "zstd":
		raw = zstdAll.EncodeAll(raw, nil)
	}
	c.set("Content-Length", strconv.Itoa(len(raw)))
	c.w.WriteHeader(r.status)
	if c.r.Method == http.MethodHead {
		c.w.WriteHeaderNow()
		return nil
	}
	_, err := c.w.Write(raw)
	return err
}

// zstdAll may be used by many at once.
var zstdAll = func() *zstd.Encoder {
	e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(2), zstd.WithWindowSize(1<<20))
	if err != nil {
		panic(err) // the options are constant
	}
	return e
}()

var gzips, zstds sync.Pool

func gzipWriter(w io.Writer) *gzip.Writer {
	if z, ok := gzips.Get().(*gzip.Writer); ok {
		z.Reset(w)
		return z
	}
	z, err := gzip.NewWriterLevel(w, gzip.BestSpeed)
	if err != nil {
		panic(err) // the level is constant
	}
	return z
}

func gzipped(raw []byte) []byte {
	b := bytes.NewBuffer(make([]byte, 0, len(raw)/3))
	z := gzipWriter(b)
	z.Write(raw) // a buffer takes all
	z.Close()
	gzips.Put(z)
	return b.Bytes()
}

// A flusher sends what was written so far on its way.
type flusher interface{ Flush() error }

// pour streams a body. Each flush of it gives the receiver another writePause.
func (c *call) pour(stream func(io.Writer) error, code string) error {
	out := &pouring{Writer: c.w, rc: http.NewResponseController(c.w)}
	out.extend()
	switch code {
	case "gzip":
		z := gzipWriter(c.w)
		defer gzips.Put(z)
		out.Writer, out.z = z, z
		if err := stream(out); err != nil {
			return err
		}
		return z.Close()
	case "zstd":
		z, ok := zstds.Get().(*zstd.Encoder)
		if ok {
			z.Reset(c.w)
		} else {
			var err error
			z, err = zstd.NewWriter(c.w, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(1), zstd.WithWindowSize(1<<20))
			if err != nil {
				return err
			}
		}
		defer func() { z.Reset(nil); zstds.Put(z) }()
		out.Writer, out.z = z, z
		if err := stream(out); err != nil {
			return err
		}
		return z.Close()
	}
	return stream(out)
}

// pouring is the writer a stream sees: through the compressor, where there is one.
type pouring struct {
	io.Writer
	z  flusher
	rc *http.ResponseController
}

// Flush sends what was written so far and gives the receiver time for the next piece.
func (p *pouring) Flush() error {
	if p.z != nil {
		if err := p.z.Flush(); err != nil {
			return err
		}
	}
	if err := p.rc.Flush(); err != nil {
		return err
	}
	p.extend()
	return nil
}

// extend needs a connection; a handler under test has none.
func (p *pouring) extend() { _ = p.rc.SetWriteDeadline(time.Now().Add(writePause)) }
