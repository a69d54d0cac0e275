package api

import (
	"bytes"
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"encoding/hex"
	"net/http"
	"net/url"
	"regexp"
	"strings"

	"github.com/swaggest/swgui"
	"github.com/swaggest/swgui/v5emb"

	"lampward/domain"
)

//go:embed openapi.yaml
var document []byte

// Contract returns openapi.yaml as it is served.
func Contract() []byte { return bytes.Clone(document) }

var documentTag = func() string {
	sum := sha256.Sum256(document)
	return `"` + hex.EncodeToString(sum[:8]) + `"`
}()

// contract answers GET /openapi.yaml.
func (s *Server) contract(c *call) (reply, error) {
	header := [][2]string{{"Etag", documentTag}}
	if strings.Contains(c.r.Header.Get("If-None-Match"), documentTag) {
		return reply{status: http.StatusNotModified, header: header}, nil
	}
	return reply{raw: document, media: "application/yaml", header: header}, nil
}

// docsPage is the page of /docs with its assets, all of them in the binary.
type docsPage struct {
	html   []byte
	policy string
	assets http.Handler
}

var docsURL = &url.URL{Path: "/docs"}

var inlineScript = regexp.MustCompile(`(?s)<script>(.*?)</script>`)

// newDocsPage makes the page once. Its policy allows the service's own files, the inline scripts by their hashes,
// pictures inside the style sheet, and calls to this service; no other host. The page sets style attributes while it
// runs, which only unsafe-inline styles permit.
func newDocsPage() docsPage {
	h := v5emb.NewHandlerWithConfig(swgui.Config{
		Title: "Lampward", SwaggerJSON: "/openapi.yaml", BasePath: "/docs",
	})
	var w capture
	h.ServeHTTP(&w, &http.Request{Method: http.MethodGet, URL: docsURL})
	policy := "default-src 'none'; connect-src 'self'; img-src 'self' data:; style-src 'self' 'unsafe-inline'; frame-ancestors 'none'; base-uri 'none'; form-action 'self'; script-src 'self'"
	for _, m := range inlineScript.FindAllSubmatch(w.b.Bytes(), -1) {
		sum := sha256.Sum256(m[1])
		policy += " 'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
	}
	// On a phone a wide table scrolls by itself, not the page.
	html := bytes.Replace(w.b.Bytes(), []byte("</head>"),
		[]byte("<style>.info table{display:block;overflow-x:auto}.info td,.info th{padding-right:1em!important}</style></head>"), 1)
	return docsPage{html: html, policy: policy, assets: h}
}

// docs answers GET /docs: openapi.yaml as a page.
func (s *Server) docs(*call) (reply, error) {
	return reply{raw: s.page.html, media: "text/html; charset=utf-8", header: [][2]string{{"Content-Security-Policy", s.page.policy}}}, nil
}

// docsAssets are the files the page asks for, with their media types.
var docsAssets = map[string]string{
	"swagger-ui.css":                  "text/css",
	"swagger-ui-bundle.js":            "text/javascript",
	"swagger-ui-standalone-preset.js": "text/javascript",
	"favicon-16x16.png":               "image/png",
	"favicon-32x32.png":               "image/png",
}

var assetMedia = []string{"text/css", "text/javascript", "image/png"}

// docsAsset answers GET /docs/{asset}.
func (s *Server) docsAsset(c *call) (reply, error) {
	media := docsAssets[c.gin.Param("asset")]
	if media == "" {
		return reply{}, domain.NotFoundf("the page has no such part")
	}
	return reply{serve: typed{s.page.assets, media}, header: [][2]string{{"Cache-Control", "public, max-age=3600"}}}, nil
}

// typed answers as its handler does, with a media type that does not depend on the machine's own table of them.
type typed struct {
	http.Handler
	media string
}

func (h typed) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	h.Handler.ServeHTTP(&typedWriter{w, h.media}, r)
}

type typedWriter struct {
	http.ResponseWriter
	media string
}

func (w *typedWriter) WriteHeader(status int) {
	w.Header().Set("Content-Type", w.media)
	w.ResponseWriter.WriteHeader(status)
}

func (w *typedWriter) Write(b []byte) (int, error) {
	w.Header().Set("Content-Type", w.media)
	return w.ResponseWriter.Write(b)
}

// capture keeps an answer in memory.
type capture struct {
	b bytes.Buffer
	h http.Header
}

func (w *capture) Header() http.Header {
	if w.h == nil {
		w.h = http.Header{}
	}
	return w.h
}
func (w *capture) Write(b []byte) (int, error) { return w.b.Write(b) }
func (w *capture) WriteHeader(int)             {}
