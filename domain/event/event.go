// Package event keeps what happened: an audit chain per building without gaps, the events that others follow, and the
// reviews that a change asks for. Rows are gathered in the scope and written last, just before the commit, under the
// building's head.
package event

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"reflect"
	"time"

	"github.com/gowebpki/jcs"
	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// An Act is one thing somebody did to one record.
type Act struct {
	Action string    // what was done, e.g. fixture.changed
	Kind   string    // of the record, e.g. fixture
	ID     domain.ID // of the record
	Body   any       // what changed; marshalled at once
	Only   string    // "audit" or "event" where the act belongs in one of them alone
}

// pending is what a transaction has yet to write.
type pending struct {
	acts []written
}

type written struct {
	Act
	body json.RawMessage
	err  error
}

type pendingKey struct{}

func gather(s domain.Scope) *pending {
	return domain.Keep(s, pendingKey{}, func() *pending { return &pending{} }, flush)
}

// Record notes that a was done. It is written to the audit and published as an event when the transaction commits.
func Record(s domain.Scope, a Act) {
	p := gather(s)
	w := written{Act: a, body: json.RawMessage("{}")}
	if a.Body != nil {
		w.body, w.err = json.Marshal(a.Body)
	}
	p.acts = append(p.acts, w)
}

// Changed returns the fields that differ between two values of one type, each with its value before and after, as the
// JSON of the values says it. Version and time of change are left out.
func Changed(before, after any) map[string]any {
	a, b := fields(before), fields(after)
	out := map[string]any{}
	for name, v := range b {
		if old := a[name]; !reflect.DeepEqual(old, v) {
			out[name] = map[string]any{"from": old, "to": v}
		}
	}
	for name, old := range a {
		if _, ok := b[name]; !ok {
			out[name] = map[string]any{"from": old, "to": nil}
		}
	}
	delete(out, "version")
	delete(out, "updated_at")
	delete(out, "created_at")
	return out
}

func fields(v any) map[string]any {
	out := map[string]any{}
	b, err := json.Marshal(v)
	if err == nil {
		err = json.Unmarshal(b, &out)
	}
	if err != nil {
		return map[string]any{"unreadable": err.Error()}
	}
	return out
}

// CreateHead starts the audit chain of a new building.
func CreateHead(ctx context.Context, s domain.Scope) error {
	_, err := s.Exec(ctx, `
		INSERT INTO building_head (building_id, audit_seq, audit_hash, event_seq, order_number)
		VALUES ($1, 0, '', 0, 0)`, s.Building)
	return domain.Classify(err, "building")
}

// head is the tip of a chain.
type head struct {
	auditSeq, eventSeq int64
	auditHash          []byte
}

// Hold locks the head of s's building until the transaction ends: from here on no other transaction of the building
// commits first. It is the last lock in the order of locks.
func Hold(ctx context.Context, s domain.Scope) error {
	_, err := hold(ctx, s)
	return err
}

func hold(ctx context.Context, s domain.Scope) (head, error) {
	var h head
	sql, args := `SELECT audit_seq, audit_hash, event_seq FROM building_head WHERE building_id = $1 FOR NO KEY UPDATE`, []any{s.Building}
	if s.Building.IsZero() {
		sql, args = `SELECT audit_seq, audit_hash, event_seq FROM central_head WHERE id = 1 FOR NO KEY UPDATE`, nil
	}
	err := s.QueryRow(ctx, sql, args...).Scan(&h.auditSeq, &h.auditHash, &h.eventSeq)
	return h, domain.Classify(err, "building")
}

// Statements that append to a building's chain, and to the central one.
var (
	toBuilding = sqls{
		audit: `INSERT INTO audit (building_id, seq, body, hash, subject_kind, subject_id, by_id, at) VALUES ($1, $2, $3, $4, $5, $6, $7, $8)`,
		event: `INSERT INTO event (building_id, seq, type, subject_kind, subject_id, body, at) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
		head:  `UPDATE building_head SET audit_seq = $2, audit_hash = $3, event_seq = $4 WHERE building_id = $1`,
	}
	toCentre = sqls{
		audit: `INSERT INTO audit_central (seq, body, hash, subject_kind, subject_id, by_id, at) VALUES ($2, $3, $4, $5, $6, $7, $8)`,
		event: `INSERT INTO event_central (seq, type, subject_kind, subject_id, body, at) VALUES ($2, $3, $4, $5, $6, $7)`,
		head:  `UPDATE central_head SET audit_seq = $2, audit_hash = $3, event_seq = $4 WHERE id = 1`,
	}
)

type sqls struct{ audit, event, head string }

func flush(ctx context.Context, s domain.Scope, p *pending) error {
	if len(p.acts) == 0 {
		return nil
	}
	h, err := hold(ctx, s)
	if err != nil {
		return err
	}
	sql, lead := toBuilding, []any{s.Building}
	if s.Building.IsZero() {
		sql, lead = toCentre, nil
		sql.audit, sql.event, sql.head = central(sql.audit), central(sql.event), central(sql.head)
	}
	var batch pgx.Batch
	queue := func(q string, args ...any) { batch.Queue(q, append(append([]any{}, lead...), args...)...) }
	for _, a := range p.acts {
		if a.err != nil {
			return fmt.Errorf("event: %s: %w", a.Action, a.err)
		}
		if a.Only != "event" {
			h.auditSeq++
			body, err := auditBody(h.auditSeq, s, a)
			if err != nil {
				return err
			}
			h.auditHash = chain(h.auditHash, body)
			queue(sql.audit, h.auditSeq, string(body), h.auditHash, a.Kind, a.ID, s.By.ID, s.At)
		}
		if a.Only != "audit" {
			h.eventSeq++
			queue(sql.event, h.eventSeq, a.Action, a.Kind, a.ID, a.body, s.At)
		}
	}
	queue(sql.head, h.auditSeq, h.auditHash, h.eventSeq)
	return domain.Classify(s.SendBatch(ctx, &batch).Close(), "audit")
}

// central renumbers a statement's arguments where there is no building in front.
func central(sql string) string {
	for i := 2; i <= 8; i++ {
		sql = string(bytes.ReplaceAll([]byte(sql), fmt.Appendf(nil, "$%d", i), fmt.Appendf(nil, "$%d", i-1)))
	}
	return sql
}

// entry is the body of an audit row.
type entry struct {
	Seq    int64           `json:"seq"`
	At     time.Time       `json:"at"`
	By     domain.Actor    `json:"by"`
	Action string          `json:"action"`
	Kind   string          `json:"subject_kind"`
	ID     domain.ID       `json:"subject_id"`
	Detail json.RawMessage `json:"detail"`
}

func auditBody(seq int64, s domain.Scope, a written) ([]byte, error) {
	b, err := json.Marshal(entry{seq, s.At, s.By, a.Action, a.Kind, a.ID, a.body})
	if err != nil {
		return nil, fmt.Errorf("event: %s: %w", a.Action, err)
	}
	b, err = jcs.Transform(b)
	if err != nil {
		return nil, fmt.Errorf("event: %s: %w", a.Action, err)
	}
	return b, nil
}

// chain returns SHA-256 over the previous hash and the body.
func chain(previous, body []byte) []byte {
	sum := sha256.New()
	sum.Write(previous)
	sum.Write(body)
	return sum.Sum(nil)
}

// Mark returns where the acts gathered so far end, for Rewind.
func Mark(s domain.Scope) int { return len(gather(s).acts) }

// Rewind forgets the acts gathered since mark: what they told was rolled back.
func Rewind(s domain.Scope, mark int) { p := gather(s); p.acts = p.acts[:mark] }
