package api

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"sort"
	"strconv"
	"strings"

	"lampward/domain"
)

// kind names a problem: the last part of its type, a stable URI path under /problems/ (RFC 9457).
type kind string

// The problems. Those of domain.Kind come first; the others are of the edge.
const (
	internal             kind = "internal"
	invalid              kind = "invalid"
	notFound             kind = "not_found"
	conflict             kind = "conflict"
	stale                kind = "stale"
	denied               kind = "denied"
	unavailable          kind = "unavailable"
	unsafe               kind = "unsafe"
	malformed            kind = "malformed"
	unauthenticated      kind = "unauthenticated"
	methodNotAllowed     kind = "method_not_allowed"
	notAcceptable        kind = "not_acceptable"
	tooSlow              kind = "too_slow"
	tooLarge             kind = "too_large"
	unsupportedMedia     kind = "unsupported_media_type"
	preconditionRequired kind = "precondition_required"
	rateLimited          kind = "rate_limited"
)

// problemKind is the status and the words of one kind.
type problemKind struct {
	status int
	title  string
	text   string // the page behind the type, for a person
}

// problemKinds is the one map from a kind of failure to its HTTP status.
var problemKinds = map[kind]problemKind{
	internal: {500, "Something went wrong on our side",
		"The request met a fault of the service. Nothing of it was stored. Tell the operator the request_id: the log holds the cause under it."},
	invalid: {422, "The request is not valid",
		"At least one value is missing, of the wrong type, out of range or unknown. errors names each by its JSON pointer (RFC 6901) in the body, or by /name where it is a query parameter. Nothing was stored. Put these right and send it again."},
	notFound: {404, "There is no such thing here",
		"The address names no record, or one that your credentials give no grant on."},
	conflict: {409, "The state of the records forbids it",
		"Another record already has this identifier, tag or code, the record is in a state that does not allow this, or the same request is still running. detail says which."},
	stale: {412, "Somebody else changed it first",
		"The version that If-Match names is no longer the stored one. Read the record again, look at what changed, and send the change with the new ETag."},
	denied: {403, "Your role is too small",
		"The credentials are good, and the record may be known to you, but the role they carry does not allow this operation. A planner or an administrator can do it or grant the role."},
	unavailable: {503, "Try again shortly",
		"The service or its database is busy, starting or stopping. Nothing was stored. Send the same request again after the seconds that Retry-After names; with an Idempotency-Key this is always safe."},
	unsafe: {409, "This would be unsafe",
		"The proposal would create or worsen a danger or a fault that blocks it. findings holds each with its arithmetic, options what may be fitted instead. A planner may override with a reason. What is already fitted is never refused: record it as a fact."},
	malformed: {400, "The request cannot be read",
		"The body is not JSON (or not the stated form), or a header is not formed as its standard says. detail tells where reading stopped."},
	unauthenticated: {401, "Credentials are needed",
		"Send Authorization: Bearer followed by an API key. The key may be missing, mistyped, ended or withdrawn."},
	methodNotAllowed: {405, "The method does not apply here",
		"The address exists, but not with this method. The Allow header lists those it has. Records are never deleted: they are retired."},
	notAcceptable: {406, "None of the accepted forms exists",
		"The Accept header leaves nothing this operation can answer with. detail lists what it can."},
	tooSlow: {408, "The request came too slowly",
		"The body did not arrive in time. Nothing of it was stored."},
	tooLarge: {413, "The body is too large",
		"The body, after decompression, is over the limit that detail names. Send it in parts."},
	unsupportedMedia: {415, "The body has a form that is not read here",
		"The Content-Type or Content-Encoding is not one this operation reads. detail lists what it can."},
	preconditionRequired: {428, "If-Match is needed",
		"A change must say which version it changes, so that nobody's work is lost: send the ETag of the record you read as If-Match (RFC 6585)."},
	rateLimited: {429, "Too many requests",
		"Your credentials (or, without any, your address) have used up their share for the moment. Retry-After says for how many seconds to wait; RateLimit and RateLimit-Policy tell the quota."},
}

// kindOf maps what went wrong in the records to a problem.
var kindOf = map[domain.Kind]kind{
	domain.Internal:    internal,
	domain.Invalid:     invalid,
	domain.NotFound:    notFound,
	domain.Conflict:    conflict,
	domain.Stale:       stale,
	domain.Denied:      denied,
	domain.Unavailable: unavailable,
	domain.Unsafe:      unsafe,
}

// retryAfter is how many seconds a caller is asked to wait where the service cannot say better.
const retryAfter = 2

// A refusal is a failure of the edge itself, where no domain.Kind fits. Its message and headers may be shown.
type refusal struct {
	kind   kind
	msg    string
	header [][2]string
	err    error // for the log only
}

func (r *refusal) Error() string {
	if r.err != nil {
		return r.msg + ": " + r.err.Error()
	}
	return r.msg
}

func (r *refusal) Unwrap() error { return r.err }

func refuse(k kind, format string, a ...any) *refusal {
	return &refusal{kind: k, msg: fmt.Sprintf(format, a...)}
}

// with adds a header to the answer.
func (r *refusal) with(name, value string) *refusal {
	r.header = append(r.header, [2]string{name, value})
	return r
}

// mostErrors is how many field errors a problem lists.
const mostErrors = 1000

// problem turns an error into its document. Only the message, the fields and More of a domain.Error, and the message
// of a refusal reach the client; everything else is told as internal and stays in the log.
func problem(err error, requestID string) reply {
	k, detail, fields, more, header := explain(err)
	p := problemKinds[k]
	out := reply{status: p.status, media: "application/problem+json", header: header}
	if k == unavailable {
		out.header = append(out.header, [2]string{"Retry-After", strconv.Itoa(retryAfter)})
	}
	if len(fields) > mostErrors {
		detail += fmt.Sprintf(" (%d errors, the first %d are listed)", len(fields), mostErrors)
		fields = fields[:mostErrors]
	}
	doc := struct {
		Type      string         `json:"type"`
		Title     string         `json:"title"`
		Status    int            `json:"status"`
		Detail    string         `json:"detail"`
		Errors    []domain.Field `json:"errors,omitempty"`
		RequestID string         `json:"request_id"`
	}{"/problems/" + string(k), p.title, p.status, detail, fields, requestID}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(doc); err != nil {
		panic(err) // strings and numbers only
	}
	out.raw = join(b.Bytes(), more)
	return out
}

// join adds the members of more, where it is an object, to the object doc (extension members of RFC 9457). A member
// of doc is never replaced.
func join(doc []byte, more any) []byte {
	if more == nil {
		return doc
	}
	raw, err := json.Marshal(more)
	if err != nil {
		return doc
	}
	var extra, base map[string]json.RawMessage
	if json.Unmarshal(raw, &extra) != nil || json.Unmarshal(doc, &base) != nil {
		return doc
	}
	names := make([]string, 0, len(extra))
	for name := range extra {
		if _, taken := base[name]; !taken {
			names = append(names, name)
		}
	}
	sort.Strings(names)
	out := bytes.TrimSuffix(bytes.TrimSpace(doc), []byte("}"))
	for _, name := range names {
		key, _ := json.Marshal(name) // a string
		out = append(out, ',')
		out = append(out, key...)
		out = append(out, ':')
		out = append(out, extra[name]...)
	}
	return append(out, '}', '\n')
}

func explain(err error) (k kind, detail string, fields []domain.Field, more any, header [][2]string) {
	if r, ok := errors.AsType[*refusal](err); ok {
		return r.kind, r.msg, nil, nil, r.header
	}
	if e, ok := errors.AsType[*domain.Error](err); ok && e.Kind != domain.Internal {
		k := kindOf[e.Kind]
		if e.Msg == "" {
			return k, problemKinds[k].title, e.Fields, e.More, nil
		}
		return k, e.Msg, e.Fields, e.More, nil
	}
	return internal, "the request could not be done because of a fault of the service; tell its operator the request_id", nil, nil, nil
}

// problemPage answers GET /problems/{kind}: what a problem means and what to do, in a few sentences.
func (s *Server) problemPage(c *call) (reply, error) {
	name := kind(c.gin.Param("kind"))
	p, ok := problemKinds[name]
	if !ok {
		return reply{}, domain.NotFoundf("there is no such kind of problem")
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s\n\n%s\n\nHTTP status %d %s. Type /problems/%s, RFC 9457.\n", p.title, p.text, p.status, http.StatusText(p.status), name)
	return reply{status: http.StatusOK, media: "text/plain; charset=utf-8", raw: []byte(b.String())}, nil
}
