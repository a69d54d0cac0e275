package api

import (
	"container/list"
	"math"
	"strconv"
	"sync"
	"time"

	"golang.org/x/time/rate"
)

// limiter holds one token bucket for each principal, of the most recently seen ones: somebody who returns after
// being forgotten finds a full bucket.
type limiter struct {
	rate   rate.Limit
	burst  int
	most   int
	policy []string // the RateLimit-Policy header

	mu    sync.Mutex
	byKey map[limitKey]*list.Element
	order *list.List // most recently seen first
}

// limitKey is an actor, or the address of somebody without credentials.
type limitKey struct {
	kind string
	id   [16]byte
	addr string
}

type bucket struct {
	key limitKey
	lim *rate.Limiter
}

func newLimiter(perSecond float64, burst, most int) *limiter {
	window := int(math.Ceil(float64(burst) / perSecond))
	return &limiter{
		rate: rate.Limit(perSecond), burst: burst, most: most,
		policy: []string{`"principal";q=` + strconv.Itoa(burst) + `;w=` + strconv.Itoa(window)},
		byKey:  map[limitKey]*list.Element{}, order: list.New(),
	}
}

func (l *limiter) bucket(key limitKey) *rate.Limiter {
	l.mu.Lock()
	defer l.mu.Unlock()
	if e, ok := l.byKey[key]; ok {
		l.order.MoveToFront(e)
		return e.Value.(*bucket).lim
	}
	if l.order.Len() >= l.most {
		last := l.order.Back()
		delete(l.byKey, last.Value.(*bucket).key)
		l.order.Remove(last)
	}
	b := &bucket{key, rate.NewLimiter(l.rate, l.burst)}
	l.byKey[key] = l.order.PushFront(b)
	return b.lim
}

// take uses one token of key at a time. Where there is none it says after how many seconds there will be.
func (l *limiter) take(key limitKey, at time.Time) (left int, wait int, ok bool) {
	b := l.bucket(key)
	ok = b.AllowN(at, 1)
	tokens := b.TokensAt(at)
	if !ok {
		wait = max(1, int(math.Ceil((1-tokens)/float64(l.rate))))
	}
	return max(0, int(tokens)), wait, ok
}

// header is the RateLimit field (draft-ietf-httpapi-ratelimit-headers-10): r remaining, t seconds to a full quota.
func (l *limiter) header(left int) string {
	var b [48]byte
	out := append(b[:0], `"principal";r=`...)
	out = strconv.AppendInt(out, int64(left), 10)
	out = append(out, `;t=`...)
	out = strconv.AppendInt(out, int64(math.Ceil(float64(l.burst-left)/float64(l.rate))), 10)
	return string(out)
}
