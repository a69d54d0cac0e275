package api

import (
	"strconv"
	"strings"

	"lampward/domain"
)

// etag is the strong entity tag of a version (RFC 9110 section 8.8.3).
func etag(version int64) string { return `"v` + strconv.FormatInt(version, 10) + `"` }

// match is what an If-Match or If-None-Match header names.
type match struct {
	given    bool
	any      bool    // *
	versions []int64 // of strong tags this service could have made
	weak     []int64 // of weak ones
}

// parseMatch reads the values of the header name: "*" or a list of entity tags. Tags that this service did not make
// match nothing. A tag of a compressed representation carries the coding after a hyphen and names the same version.
func parseMatch(name string, values []string) (match, error) {
	if len(values) == 0 {
		return match{}, nil
	}
	m := match{given: true}
	bad := refuse(malformed, `%s must be * or entity tags in double quotes, such as "v7"`, name)
	rest := strings.TrimSpace(strings.Join(values, ","))
	if rest == "*" {
		m.any = true
		return m, nil
	}
	for rest != "" {
		weak := strings.HasPrefix(rest, "W/")
		if weak {
			rest = rest[2:]
		}
		if rest[:min(1, len(rest))] != `"` {
			return match{}, bad
		}
		end := strings.IndexByte(rest[1:], '"')
		if end < 0 {
			return match{}, bad
		}
		opaque := rest[1 : 1+end]
		for i := range len(opaque) {
			if opaque[i] <= ' ' || opaque[i] == 0x7f {
				return match{}, bad
			}
		}
		if v, ok := versionOf(opaque); ok && weak {
			m.weak = append(m.weak, v)
		} else if ok {
			m.versions = append(m.versions, v)
		}
		rest = strings.TrimLeft(rest[end+2:], " \t")
		if rest == "" {
			break
		}
		if rest[0] != ',' {
			return match{}, bad
		}
		rest = strings.TrimLeft(rest, ", \t")
	}
	return m, nil
}

func versionOf(opaque string) (int64, bool) {
	if i := strings.IndexByte(opaque, '-'); i > 0 && (opaque[i:] == "-gzip" || opaque[i:] == "-zstd") {
		opaque = opaque[:i]
	}
	if len(opaque) < 2 || opaque[0] != 'v' || opaque[1] < '1' || opaque[1] > '9' {
		return 0, false
	}
	v, err := strconv.ParseInt(opaque[1:], 10, 64)
	return v, err == nil
}

// strong reports whether m names version by strong comparison, as If-Match asks for.
func (m match) strong(version int64) bool {
	if m.any {
		return true
	}
	for _, v := range m.versions {
		if v == version {
			return true
		}
	}
	return false
}

// loose reports whether m names version by weak comparison, as If-None-Match asks for.
func (m match) loose(version int64) bool {
	for _, v := range m.weak {
		if v == version {
			return true
		}
	}
	return m.strong(version)
}

// check fails with Stale where m was given and does not name version.
func (m match) check(what string, version int64) error {
	if !m.given || m.strong(version) {
		return nil
	}
	return &domain.Error{Kind: domain.Stale, Msg: what + " was changed by someone else; read it again"}
}
