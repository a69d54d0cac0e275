package api

import (
	"net/url"
	"slices"
	"strconv"

	"lampward/domain"
)

// asked are the parameters of an operation that answers items which are no records of a table.
type asked struct {
	page   domain.Page
	values map[string]any // by name, of those given
	query  url.Values
}

// paged reads the parameters of such an operation; pages says whether limit and cursor are among them. Every wrong one
// is told at once.
func (c *call) paged(filters []filter, pages bool) (asked, error) {
	values, err := url.ParseQuery(c.r.URL.RawQuery)
	if err != nil {
		return asked{}, refuse(malformed, "the query of the address is not formed as application/x-www-form-urlencoded")
	}
	if !pages {
		for _, name := range []string{"limit", "cursor"} {
			if values.Has(name) {
				return asked{}, &domain.Error{Kind: domain.Invalid, Msg: "the query is not valid",
					Fields: []domain.Field{{Pointer: "/" + name, Detail: "is not a parameter here"}}}
			}
		}
	}
	q, err := parseQuery(values, filters, nil, false)
	if err != nil {
		return asked{}, err
	}
	out := asked{page: q.page, values: map[string]any{}, query: values}
	for _, m := range q.matches {
		i := slices.IndexFunc(filters, func(f filter) bool { return f.Name == m.Column || f.Column == m.Column && f.Op == m.Op })
		out.values[filters[i].Name] = m.Value
	}
	return out, nil
}

// page answers items with a link to the next page.
func (c *call) page(items any, next string, q asked) reply {
	out := reply{body: map[string]any{"items": items}}
	if next != "" {
		q.query.Set("cursor", next)
		q.query.Set("limit", strconv.Itoa(q.page.Limit))
		out.header = append(out.header, [2]string{"Link", "<" + c.r.URL.EscapedPath() + "?" + q.query.Encode() + `>; rel="next"`})
	}
	return out
}

// value returns a parameter that was given, the zero value otherwise.
func value[T any](q asked, name string) T {
	v, _ := q.values[name].(T)
	return v
}
