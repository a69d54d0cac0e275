// Package apitest is a client for tests of the HTTP interface. It holds every exchange against openapi.yaml, both ways:
// what the contract forbids must be refused, what is answered must be documented. It also counts which documented
// status of which operation some test has produced.
package apitest

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"maps"
	"net/http"
	"os"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"sync"

	"github.com/getkin/kin-openapi/openapi3"
	"github.com/getkin/kin-openapi/openapi3filter"
)

// Contract is openapi.yaml as the tests hold it against the service.
type Contract struct {
	doc *openapi3.T
	ops []Operation

	mu   sync.Mutex
	seen map[string]map[int]int // operationId, status, how often
}

// Operation is one line of the contract.
type Operation struct {
	Method, Path, ID string
	Public           bool
	Right, Scope     string // x-right and x-scope
	item             *openapi3.PathItem
	op               *openapi3.Operation
	pattern          *regexp.Regexp
	names            []string
}

// Load reads a contract. It fails where the document is not valid OpenAPI 3.1.
func Load(document []byte) (*Contract, error) {
	register()
	loader := openapi3.NewLoader()
	doc, err := loader.LoadFromData(document)
	if err != nil {
		return nil, err
	}
	if err := doc.Validate(loader.Context); err != nil {
		return nil, err
	}
	if !doc.IsOpenAPI31OrLater() {
		return nil, fmt.Errorf("apitest: the contract is OpenAPI %s, not 3.1", doc.OpenAPI)
	}
	c := &Contract{doc: doc, seen: map[string]map[int]int{}}
	for path, item := range doc.Paths.Map() {
		pattern, names := compile(path)
		for method, op := range item.Operations() {
			o := Operation{Method: method, Path: path, ID: op.OperationID, item: item, op: op, pattern: pattern, names: names}
			o.Public = op.Security != nil && len(*op.Security) == 0
			o.Right, _ = op.Extensions["x-right"].(string)
			o.Scope, _ = op.Extensions["x-scope"].(string)
			c.ops = append(c.ops, o)
		}
	}
	slices.SortFunc(c.ops, func(a, b Operation) int { return strings.Compare(a.Path+a.Method, b.Path+b.Method) })
	return c, nil
}

// Operations returns every operation of the contract in the order of paths.
func (c *Contract) Operations() []Operation { return slices.Clone(c.ops) }

// Statuses returns the statuses the operation documents, in order; "default" is none.
func (o Operation) Statuses() []int {
	var out []int
	for s := range o.op.Responses.Map() {
		if n, err := strconv.Atoi(s); err == nil {
			out = append(out, n)
		}
	}
	slices.Sort(out)
	return out
}

// Field is a property of a request body or a query parameter: its type, and what narrows it.
type Field struct {
	Name, Type, Format string
	Enum               []any
}

// Fields returns the properties of the body that the operation reads, in the order of their names.
func (o Operation) Fields() []Field {
	if o.op.RequestBody == nil {
		return nil
	}
	out := map[string]Field{}
	var gather func(*openapi3.SchemaRef)
	gather = func(ref *openapi3.SchemaRef) {
		for _, part := range ref.Value.AllOf {
			gather(part)
		}
		for name, p := range ref.Value.Properties {
			out[name] = fieldOf(name, p)
		}
	}
	for _, m := range o.op.RequestBody.Value.Content {
		gather(m.Schema)
	}
	return slices.SortedFunc(maps.Values(out), func(a, b Field) int { return strings.Compare(a.Name, b.Name) })
}

// Query returns the query parameters that the operation reads, in the order of their names.
func (o Operation) Query() []Field {
	var out []Field
	for _, list := range []openapi3.Parameters{o.item.Parameters, o.op.Parameters} {
		for _, p := range list {
			if p.Value.In == openapi3.ParameterInQuery {
				out = append(out, fieldOf(p.Value.Name, p.Value.Schema))
			}
		}
	}
	slices.SortFunc(out, func(a, b Field) int { return strings.Compare(a.Name, b.Name) })
	return out
}

func fieldOf(name string, ref *openapi3.SchemaRef) Field {
	f := Field{Name: name, Format: ref.Value.Format, Enum: ref.Value.Enum}
	if ref.Value.Type != nil && len(*ref.Value.Type) > 0 {
		f.Type = (*ref.Value.Type)[0]
	}
	return f
}

// BodyMedia returns the media types of the body that the operation reads, in the order of their names.
func (o Operation) BodyMedia() []string {
	if o.op.RequestBody == nil {
		return nil
	}
	return slices.Sorted(maps.Keys(o.op.RequestBody.Value.Content))
}

var braces = regexp.MustCompile(`\{([a-z_]+)\}`)

func compile(path string) (*regexp.Regexp, []string) {
	var names []string
	for _, m := range braces.FindAllStringSubmatch(path, -1) {
		names = append(names, m[1])
	}
	quoted := braces.ReplaceAllString(path, "\x00")
	quoted = strings.ReplaceAll(regexp.QuoteMeta(quoted), "\x00", "([^/]+)")
	return regexp.MustCompile("^" + quoted + "$"), names
}

// find returns the operation of a request; a path without parameters comes before one that has some. HEAD is the
// operation of GET.
func (c *Contract) find(method, path string) (o *Operation, params map[string]string) {
	if method == http.MethodHead {
		method = http.MethodGet
	}
	for i := range c.ops {
		m := c.ops[i].pattern.FindStringSubmatch(path)
		if m == nil || c.ops[i].Method != method || o != nil && len(o.names) <= len(c.ops[i].names) {
			continue
		}
		o, params = &c.ops[i], map[string]string{}
		for j, name := range o.names {
			params[name] = m[j+1]
		}
	}
	return o, params
}

func (c *Contract) count(id string, status int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.seen[id] == nil {
		c.seen[id] = map[int]int{}
	}
	c.seen[id][status]++
}

// Uncovered returns every documented status that no exchange has produced, as "operation status".
func (c *Contract) Uncovered() []string {
	c.mu.Lock()
	defer c.mu.Unlock()
	var out []string
	for _, o := range c.ops {
		for _, s := range o.Statuses() {
			if c.seen[o.ID][s] == 0 {
				out = append(out, o.ID+" "+strconv.Itoa(s))
			}
		}
	}
	return out
}

// Covering wraps the tests of a package: a run of all of them fails where a documented status was never produced.
func (c *Contract) Covering(m interface{ Run() int }) interface{ Run() int } { return covering{c, m} }

type covering struct {
	contract *Contract
	tests    interface{ Run() int }
}

func (c covering) Run() int {
	code := c.tests.Run()
	for _, name := range []string{"test.run", "test.skip", "test.bench", "test.fuzz", "test.list"} {
		if f := flag.Lookup(name); f != nil && f.Value.String() != "" {
			return code // a part of the tests cannot cover all
		}
	}
	if missing := c.contract.Uncovered(); len(missing) > 0 && code == 0 {
		fmt.Fprintf(os.Stderr, "apitest: documented, but produced by no test:\n  %s\n", strings.Join(missing, "\n  "))
		return 1
	}
	return code
}

var register = sync.OnceFunc(func() {
	openapi3.DefineStringFormatValidator("uuid", openapi3.NewRegexpFormatValidator(`^[0-9a-f]{8}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{12}$`))
	for _, media := range []string{"text/html", "text/css", "text/javascript", "application/openmetrics-text", "text/csv", "image/png",
		"application/zip", "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"} {
		openapi3filter.RegisterBodyDecoder(media, plain)
	}
	openapi3filter.RegisterBodyDecoder("application/yaml", plain)
	openapi3filter.RegisterBodyDecoder("application/x-ndjson", lines)
})

func plain(body io.Reader, _ http.Header, _ *openapi3.SchemaRef, _ openapi3filter.EncodingFn) (any, error) {
	b, err := io.ReadAll(body)
	return string(b), err
}

// lines reads NDJSON as the list of its lines; the contract describes it so.
func lines(body io.Reader, _ http.Header, _ *openapi3.SchemaRef, _ openapi3filter.EncodingFn) (any, error) {
	out := []any{}
	sc := bufio.NewScanner(body)
	sc.Buffer(nil, 1<<24)
	for sc.Scan() {
		var v any
		if err := json.Unmarshal(sc.Bytes(), &v); err != nil {
			return nil, err
		}
		out = append(out, v)
	}
	return out, sc.Err()
}

// unexpected are the statuses that may come of any operation without being documented by it: "default" stands for
// them.
var unexpected = map[int]bool{http.StatusRequestTimeout: true, http.StatusInternalServerError: true, http.StatusServiceUnavailable: true}

// check holds one exchange against the contract.
func (c *Contract) check(r *http.Request, status int, header http.Header, body []byte) error {
	o, params := c.find(r.Method, r.URL.Path)
	if o == nil {
		if status != http.StatusNotFound && status != http.StatusMethodNotAllowed {
			return fmt.Errorf("an address that is not in the contract answered %d", status)
		}
		if r.Method == http.MethodHead {
			return nil
		}
		return c.checkProblem(header, body)
	}
	documented := o.op.Responses.Status(status) != nil
	if !documented && !(unexpected[status] && o.op.Responses.Default() != nil) {
		return fmt.Errorf("%s answered %d, which it does not document", o.ID, status)
	}
	c.count(o.ID, status)
	in := &openapi3filter.RequestValidationInput{
		Request: r, PathParams: params, QueryParams: r.URL.Query(), Route: route(c.doc, o),
		Options: &openapi3filter.Options{
			AuthenticationFunc: authenticated, RejectWhenRequestBodyNotSpecified: true, SkipSettingDefaults: true,
		},
	}
	if err := openapi3filter.ValidateRequest(r.Context(), in); err != nil && status < 400 {
		return fmt.Errorf("%s: the contract forbids this request, but it was answered %d: %w", o.ID, status, err)
	}
	if r.Method == http.MethodHead {
		return nil
	}
	out := &openapi3filter.ResponseValidationInput{
		RequestValidationInput: in, Status: status, Header: header,
		Options: &openapi3filter.Options{IncludeResponseStatus: true},
	}
	out.SetBodyBytes(body)
	if err := openapi3filter.ValidateResponse(r.Context(), out); err != nil {
		return fmt.Errorf("%s: the answer %d is not as the contract says: %w", o.ID, status, err)
	}
	if status >= 400 {
		return c.checkProblem(header, body)
	}
	return nil
}

func authenticated(_ context.Context, in *openapi3filter.AuthenticationInput) error {
	if in.RequestValidationInput.Request.Header.Get("Authorization") == "" {
		return errors.New("no Authorization header")
	}
	return nil
}

// leak is what no problem may show: SQL, files, Go's names, the words of libraries.
var leak = regexp.MustCompile(`SQLSTATE|(?i:\bselect\b.+\bfrom\b)|(?i:\binsert\s+into\b)|(?i:\bupdate\b.+\bset\b.+=)|(?i:\bdelete\s+from\b)` +
	`|(?i:(relation|constraint|column) \\?")|pgx|pgconn|\.go\b|/(root|home|usr|tmp|var|etc|opt|work)/|[A-Z]:\\` +
	`|goroutine |runtime error|nil pointer|0x[0-9a-f]{6,}|\*?\b(api|domain|site|plant|event|access|review|loading|retrofit|json|strconv|time|context|http|net|reflect)\.[A-Z]` +
	`|invalid character|unexpected end of JSON|map\[|struct \{`)

// checkProblem holds a body against the Problem schema, whatever the operation, and looks for leaks.
func (c *Contract) checkProblem(header http.Header, body []byte) error {
	if got := header.Get("Content-Type"); got != "application/problem+json" {
		return fmt.Errorf("a failure was answered as %q, not as a problem", got)
	}
	var v any
	if err := json.Unmarshal(body, &v); err != nil {
		return fmt.Errorf("the problem is not JSON: %w", err)
	}
	if err := c.doc.Components.Schemas["Problem"].Value.VisitJSON(v, openapi3.EnableJSONSchema2020()); err != nil {
		return fmt.Errorf("the problem is not as the contract says: %w", err)
	}
	if found := leak.Find(body); found != nil {
		return fmt.Errorf("the problem shows the inside of the service: %q in %s", found, body)
	}
	return nil
}
