package event

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"time"

	"lampward/domain"
)

// An Entry is one row of the audit as it is shown.
type Entry struct {
	Seq         int64           `json:"seq"`
	At          time.Time       `json:"at"`
	By          domain.Actor    `json:"by"`
	Action      string          `json:"action"`
	SubjectKind string          `json:"subject_kind"`
	SubjectID   domain.ID       `json:"subject_id"`
	Detail      json.RawMessage `json:"detail"`
	Hash        string          `json:"hash"` // hex
}

// A Filter narrows a list of audit entries; zero fields do not.
type Filter struct {
	Subject  domain.ID
	By       domain.ID
	From, To time.Time
}

// Audit lists entries of s's building (of the central chain where s has none) from the newest on, at most page.Rows() of
// them after the page's cursor, and the cursor of the next page, empty at the end.
func Audit(ctx context.Context, s domain.Scope, f Filter, page domain.Page) ([]Entry, string, error) {
	before := int64(1) << 62
	if page.Cursor != "" {
		if err := domain.DecodeCursor(page.Cursor, &before); err != nil {
			return nil, "", err
		}
	}
	from, args := `audit WHERE building_id = $1`, []any{s.Building}
	if s.Building.IsZero() {
		from = `audit_central WHERE $1::uuid IS NOT NULL`
	}
	rows, err := s.Query(ctx, `
		SELECT body, hash
		  FROM `+from+`
		   AND seq < $2
		   AND ($3::uuid IS NULL OR subject_id = $3)
		   AND ($4::uuid IS NULL OR by_id = $4)
		   AND ($5::timestamptz IS NULL OR at >= $5)
		   AND ($6::timestamptz IS NULL OR at < $6)
		 ORDER BY seq DESC
		 LIMIT $7`, append(args, before, orNil(f.Subject), orNil(f.By), timeOrNil(f.From), timeOrNil(f.To), page.Rows()+1)...)
	if err != nil {
		return nil, "", domain.Classify(err, "audit")
	}
	defer rows.Close()
	out := []Entry{}
	for rows.Next() {
		var body string
		var hash []byte
		if err := rows.Scan(&body, &hash); err != nil {
			return nil, "", domain.Classify(err, "audit")
		}
		var e Entry
		if err := json.Unmarshal([]byte(body), &e); err != nil {
			return nil, "", fmt.Errorf("audit entry cannot be read: %w", err)
		}
		e.Hash = fmt.Sprintf("%x", hash)
		out = append(out, e)
	}
	if err := rows.Err(); err != nil {
		return nil, "", domain.Classify(err, "audit")
	}
	if len(out) > page.Rows() {
		out = out[:page.Rows()]
		return out, domain.EncodeCursor(out[len(out)-1].Seq), nil
	}
	return out, "", nil
}

func orNil(id domain.ID) *domain.ID {
	if id.IsZero() {
		return nil
	}
	return &id
}

func timeOrNil(t time.Time) *time.Time {
	if t.IsZero() {
		return nil
	}
	return &t
}

// Verification is the outcome of recomputing one chain.
type Verification struct {
	Building domain.ID `json:"building_id"` // zero: the central chain
	Entries  int64     `json:"entries"`
	Broken   int64     `json:"broken_at,omitempty"` // sequence of the first entry that does not fit; 0: none
	Why      string    `json:"why,omitempty"`
}

// Verify recomputes the chain of s's building (the central one where s has none) and names the first entry that does
// not fit: one missing, changed (its body or a column that lists are narrowed by), or added behind the head's back.
func Verify(ctx context.Context, s domain.Scope) (Verification, error) {
	v := Verification{Building: s.Building}
	// One statement reads the head and all entries, so that what is committed meanwhile is seen in both or in neither.
	sql := `
		SELECT h.audit_seq, h.audit_hash, a.seq, a.body, a.hash, a.subject_kind, a.subject_id, a.by_id, a.at
		  FROM building_head h
		  LEFT JOIN audit a ON a.building_id = h.building_id
		 WHERE h.building_id = $1
		 ORDER BY a.seq`
	args := []any{s.Building}
	if s.Building.IsZero() {
		sql, args = `
		SELECT h.audit_seq, h.audit_hash, a.seq, a.body, a.hash, a.subject_kind, a.subject_id, a.by_id, a.at
		  FROM central_head h
		  LEFT JOIN audit_central a ON true
		 WHERE h.id = 1
		 ORDER BY a.seq`, nil
	}
	rows, err := s.Query(ctx, sql, args...)
	if err != nil {
		return v, domain.Classify(err, "audit")
	}
	defer rows.Close()
	var tip head
	last, known := []byte{}, false
	for rows.Next() {
		var seq *int64
		var body, kind *string
		var hash []byte
		var subject, by domain.ID
		var at *time.Time
		if err := rows.Scan(&tip.auditSeq, &tip.auditHash, &seq, &body, &hash, &kind, &subject, &by, &at); err != nil {
			return v, domain.Classify(err, "audit")
		}
		known = true
		if seq == nil {
			continue
		}
		var e entry
		switch {
		case *seq != v.Entries+1:
			v.Broken, v.Why = v.Entries+1, fmt.Sprintf("entry %d is missing", v.Entries+1)
		case json.Unmarshal([]byte(*body), &e) != nil || e.Seq != *seq:
			v.Broken, v.Why = *seq, fmt.Sprintf("entry %d does not carry its own number", *seq)
		case !bytes.Equal(chain(last, []byte(*body)), hash):
			v.Broken, v.Why = *seq, fmt.Sprintf("entry %d was changed after it was written", *seq)
		case e.Kind != *kind || e.ID != subject || e.By.ID != by || !e.At.Equal(*at):
			v.Broken, v.Why = *seq, fmt.Sprintf("entry %d is listed under another subject, actor or time than it tells", *seq)
		}
		if v.Broken != 0 {
			return v, nil
		}
		v.Entries, last = *seq, hash
	}
	if err := rows.Err(); err != nil {
		return v, domain.Classify(err, "audit")
	}
	switch {
	case !known:
		return v, domain.NotFoundf("there is no such building")
	case tip.auditSeq > v.Entries:
		v.Broken, v.Why = v.Entries+1, fmt.Sprintf("the head counts %d entries, the last %d are missing", tip.auditSeq, tip.auditSeq-v.Entries)
	case tip.auditSeq < v.Entries:
		v.Broken, v.Why = tip.auditSeq+1, fmt.Sprintf("entry %d was added behind the head's back", tip.auditSeq+1)
	case !bytes.Equal(tip.auditHash, last):
		v.Broken, v.Why = tip.auditSeq, "the head does not carry the last entry's hash"
	}
	return v, nil
}
