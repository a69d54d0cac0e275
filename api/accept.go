package api

import (
	"net/http"
	"strconv"
	"strings"
)

// preferred returns the index of the offer that an Accept header likes best, the earlier among equals, and false
// where it accepts none. Offers are media types without parameters, or content codings.
func preferred(header string, offers []string) (int, bool) {
	if header == "" || header == "*/*" || header == offers[0] {
		return 0, true
	}
	best, bestQ := -1, 0.0
	for i, offer := range offers {
		q, specific := 0.0, -1
		for part := range strings.SplitSeq(header, ",") {
			name, params, _ := strings.Cut(part, ";")
			s := covers(strings.ToLower(strings.TrimSpace(name)), offer)
			if s <= specific {
				continue
			}
			q, specific = quality(params), s
		}
		if q > bestQ {
			best, bestQ = i, q
		}
	}
	return best, best >= 0
}

// covers tells how closely a range names an offer: 2 exactly, 1 by type, 0 by */* or *, -1 not at all.
func covers(rang, offer string) int {
	switch {
	case rang == offer:
		return 2
	case rang == "*/*", rang == "*":
		return 0
	case strings.HasSuffix(rang, "/*") && strings.HasPrefix(offer, rang[:len(rang)-1]):
		return 1
	}
	return -1
}

// quality reads the q parameter; a malformed one counts as 0.
func quality(params string) float64 {
	for p := range strings.SplitSeq(params, ";") {
		k, v, ok := strings.Cut(strings.TrimSpace(p), "=")
		if ok && strings.EqualFold(k, "q") {
			q, err := strconv.ParseFloat(v, 64)
			if err != nil || !(q >= 0 && q <= 1) {
				return 0
			}
			return q
		}
	}
	return 1
}

// accepts chooses the form of the answer among those the route gives.
func (c *call) accepts() error {
	gives := c.route.Gives
	i, ok := preferred(strings.Join(c.r.Header["Accept"], ","), gives)
	if !ok {
		return refuse(notAcceptable, "this operation answers %s", strings.Join(gives, " or "))
	}
	c.media = gives[i]
	return nil
}

// coding chooses the content coding of the answer: zstd, gzip or none.
func coding(r *http.Request) string {
	values := r.Header["Accept-Encoding"]
	if len(values) == 0 {
		return ""
	}
	header := strings.Join(values, ",")
	if header == "" || header == "identity" {
		return ""
	}
	offers := [...]string{"zstd", "gzip"}
	if i, ok := preferred(header, offers[:]); ok {
		return offers[i]
	}
	return ""
}
