package api

import (
	"net/http"
	"strings"
	"time"
)

// route is one operation: its line in the route table says all that the edge must know of it.
type route struct {
	Method string
	Path   string // as in openapi.yaml: /v1/buildings/{building_id}/drivers
	Op     string // operationId; the handler is named as it
	Right  right
	Scope  scope
	Handle func(*call) (reply, error)

	Gives   []string      // media types it answers; JSON where empty
	Takes   []string      // media types of the body; none where empty
	Match   bool          // If-Match is needed
	Body    int64         // largest body in bytes, decompressed; Limits.Body where 0
	Timeout time.Duration // Limits.Timeout where 0, none where negative
	Secret  bool          // the answer holds a secret: for a repeat it is kept sealed, and only who asked can open it

	body int64
	meter
}

// templates in gin's form are of the path in OpenAPI's.
var braces = strings.NewReplacer("{", ":", "}", "")

// table is every operation there is. openapi.yaml says the same; a test holds the two equal both ways.
func (s *Server) table() []route {
	jsonOnly := []string{jsonMedia}
	text := []string{"text/plain"}
	t := []route{
		{Method: http.MethodGet, Path: "/livez", Op: "live", Scope: public, Handle: s.live, Gives: jsonOnly},
		{Method: http.MethodGet, Path: "/readyz", Op: "ready", Scope: public, Handle: s.ready, Gives: jsonOnly},
		{Method: http.MethodGet, Path: "/metrics", Op: "metrics", Scope: public, Handle: s.metrics, Gives: []string{metricMedia, "text/plain"}},
		{Method: http.MethodGet, Path: "/openapi.yaml", Op: "contract", Scope: public, Handle: s.contract, Gives: []string{"application/yaml"}},
		{Method: http.MethodGet, Path: "/docs", Op: "docs", Scope: public, Handle: s.docs, Gives: []string{"text/html"}},
		{Method: http.MethodGet, Path: "/docs/{asset}", Op: "docsAsset", Scope: public, Handle: s.docsAsset, Gives: assetMedia},
		{Method: http.MethodGet, Path: "/problems/{kind}", Op: "problem", Scope: public, Handle: s.problemPage, Gives: text},
	}
	t = append(t, s.estate()...)
	t = append(t, s.catalogued()...)
	t = append(t, s.holders()...)
	t = append(t, s.register()...)
	t = append(t, s.checks()...)
	t = append(t, s.files()...)
	return append(t, s.more...)
}
