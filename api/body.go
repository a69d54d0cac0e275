package api

import (
	"bytes"
	"context"
	"errors"
	"io"
	"mime"
	"net/http"
	"os"
	"strings"
	"sync"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"lampward/domain"
)

const (
	jsonMedia   = "application/json"
	patchMedia  = "application/merge-patch+json"
	ndjsonMedia = "application/x-ndjson"
	csvMedia    = "text/csv"

	codings = "gzip, zstd"

	// readPause is how long a sender of a body may be silent.
	readPause = 30 * time.Second
	// zstdWindow bounds what a hostile frame can make the decoder allocate.
	zstdWindow = 8 << 20
)

// takes checks that the body has a form the route reads, and returns that media type.
func (c *call) takes() (string, error) {
	forms := c.route.Takes
	if len(forms) == 0 {
		return "", c.noBody()
	}
	value := c.r.Header.Get("Content-Type")
	if value == jsonMedia && forms[0] == jsonMedia {
		return jsonMedia, nil
	}
	media, params, err := mime.ParseMediaType(value)
	charset := strings.ToLower(params["charset"])
	if err == nil && (charset == "" || charset == "utf-8") {
		for _, f := range forms {
			if f == media {
				return media, nil
			}
		}
	}
	list := strings.Join(forms, ", ")
	r := refuse(unsupportedMedia, "the Content-Type must be %s", strings.Join(forms, " or "))
	if c.r.Method == http.MethodPatch {
		return "", r.with("Accept-Patch", list)
	}
	return "", r.with("Accept", list)
}

// noBody refuses a body where the operation takes none.
func (c *call) noBody() error {
	if c.r.ContentLength == 0 {
		return nil
	}
	body, err := c.body()
	if err != nil {
		return err
	}
	if len(bytes.TrimSpace(body)) > 0 {
		return domain.Invalidf("this operation takes no body")
	}
	return nil
}

// body returns the whole decompressed body. It fails with tooLarge over the route's limit.
func (c *call) body() ([]byte, error) {
	if c.whole != nil {
		return c.whole, nil
	}
	src, err := c.stream()
	if err != nil {
		return nil, err
	}
	defer src.Close()
	size := c.r.ContentLength
	if size < 0 || size > c.route.body {
		size = 0
	}
	b := bytes.NewBuffer(make([]byte, 0, size+bytes.MinRead))
	if _, err := b.ReadFrom(src); err != nil {
		return nil, err
	}
	c.whole = b.Bytes()
	return c.whole, nil
}

// stream returns the decompressed body for reading piece by piece. Reading fails with tooLarge over the route's
// limit, counted after decompression, so that a small body cannot become a large one.
func (c *call) stream() (io.ReadCloser, error) {
	limit := c.route.body
	if c.r.ContentLength > limit {
		return nil, c.oversize()
	}
	raw := &pausing{c: c, src: c.r.Body}
	coding := strings.ToLower(strings.TrimSpace(c.r.Header.Get("Content-Encoding")))
	switch coding {
	case "", "identity":
		return &limited{c: c, src: raw, left: limit, end: raw.done}, nil
	case "gzip", "x-gzip":
		z, ok := gunzips.Get().(*gzip.Reader)
		if !ok {
			z = new(gzip.Reader)
		}
		if err := z.Reset(raw); err != nil {
			return nil, c.bodyError(err)
		}
		return &limited{c: c, src: z, left: limit, end: func() { raw.done(); gunzips.Put(z) }}, nil
	case "zstd":
		z, ok := unzstds.Get().(*zstd.Decoder)
		if !ok {
			var err error
			z, err = zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxWindow(zstdWindow), zstd.WithDecoderLowmem(true))
			if err != nil {
				return nil, err
			}
		}
		if err := z.Reset(raw); err != nil {
			return nil, c.bodyError(err)
		}
		return &limited{c: c, src: z, left: limit, end: func() {
			raw.done()
			if z.Reset(nil) == nil {
				unzstds.Put(z)
			}
		}}, nil
	}
	return nil, refuse(unsupportedMedia, "the Content-Encoding must be one of %s, or none", codings).with("Accept-Encoding", codings)
}

var gunzips, unzstds sync.Pool

func (c *call) oversize() error {
	// The rest of the body is not read, so the connection cannot be used again.
	return refuse(tooLarge, "the body is over the limit of %d bytes for this operation, counted after decompression", c.route.body).with("Connection", "close")
}

// bodyError tells what went wrong while a body was read.
func (c *call) bodyError(err error) error {
	switch {
	case err == nil, err == io.EOF: // the plain end, not one inside a broken body
		return err
	case c.ctx.Err() != nil:
		return domain.Classify(context.Cause(c.ctx), "body")
	case errors.Is(err, os.ErrDeadlineExceeded):
		return &refusal{kind: tooSlow, msg: "the body did not arrive in time", header: [][2]string{{"Connection", "close"}}, err: err}
	}
	if _, ok := errors.AsType[*refusal](err); ok {
		return err
	}
	return &refusal{kind: malformed, msg: "the body broke off or is not what its Content-Encoding says", err: err}
}

// pausing reads the raw body and ends where its sender is silent for too long.
type pausing struct {
	c   *call
	src io.Reader
	set bool
}

func (p *pausing) Read(b []byte) (int, error) {
	if err := p.c.ctx.Err(); err != nil {
		return 0, err
	}
	// A handler under test has no connection and so no deadline; nothing is lost there.
	p.set = http.NewResponseController(p.c.w).SetReadDeadline(time.Now().Add(readPause)) == nil
	return p.src.Read(b)
}

// done takes the deadline off, or it would end the request while the answer is still being made.
func (p *pausing) done() {
	if p.set {
		p.set = http.NewResponseController(p.c.w).SetReadDeadline(time.Time{}) != nil
	}
}

// limited lets at most left bytes through.
type limited struct {
	c    *call
	src  io.Reader
	left int64
	end  func()
}

func (l *limited) Read(b []byte) (int, error) {
	if l.left < 0 {
		return 0, l.c.oversize()
	}
	if int64(len(b)) > l.left+1 {
		b = b[:l.left+1]
	}
	n, err := l.src.Read(b)
	if l.left -= int64(n); l.left < 0 {
		return 0, l.c.oversize()
	}
	return n, l.c.bodyError(err)
}

func (l *limited) Close() error {
	if l.end != nil {
		l.end()
		l.end = nil
	}
	return nil
}

// decode reads the body of c as one strict JSON value.
func decode[T any](c *call) (T, error) {
	body, err := c.body()
	if err != nil {
		var none T
		return none, err
	}
	return decodeJSON[T](body)
}
