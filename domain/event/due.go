package event

import (
	"context"

	"lampward/domain"
)

// Due says what must be reviewed again, and why. All fields absent but Why: every building.
type Due struct {
	Building  *domain.ID
	Tree      *domain.ID
	ModelKind string     // only trees that hold this model ...
	Model     *domain.ID // ... of this kind
	Why       string
}

// ReviewDue writes down that a review is owed. It belongs to the transaction that makes it necessary; a job drains it.
func ReviewDue(ctx context.Context, s domain.Scope, d Due) error {
	_, err := s.Exec(ctx, `
		INSERT INTO review_due (id, building_id, tree_id, model_kind, model_id, why, created_at)
		VALUES ($1, $2, $3, $4, $5, $6, $7)`,
		domain.NewID(), d.Building, d.Tree, d.ModelKind, d.Model, d.Why, s.At)
	return domain.Classify(err, "review")
}
