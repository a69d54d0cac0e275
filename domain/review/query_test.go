package review_test

import (
	"context"
	"testing"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// Two circuits of one board whose residual-current device nobody looked at ask one question, about the board.
func TestDeviceIsAskedOnceABoard(t *testing.T) {
	x := setup(t)
	err := domain.In(context.Background(), x.db, domain.ID{}, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		m, err := plant.DriverModels.Lock(context.Background(), s, x.m.Wound100.ID)
		if err != nil {
			return err
		}
		m.LeakageMA = domaintest.Of(10.0) // above 30 % of 30 mA: which device there is decides
		return plant.UpdateModel(context.Background(), s, plant.DriverModels, &m, "driver_model")
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, way := range []string{"1", "2"} {
		k, _, _, _ := x.transformer(way, x.m.Wound100.ID, x.m.Halogen35.ID, 2)
		x.must(review.Touch{Circuits: []domain.ID{k.ID}}, func(ctx context.Context, e *plant.Edit) error {
			c, err := plant.Circuits.Get(ctx, e.Scope, k.ID)
			if err != nil {
				return err
			}
			c.RCD = ""
			return e.UpdateCircuit(ctx, &c)
		})
	}
	cat, err := plant.LoadCatalogue(context.Background(), x.db)
	if err != nil {
		t.Fatal(err)
	}
	list, total, err := review.Questions(context.Background(), x.scope(), cat)
	if err != nil {
		t.Fatal(err)
	}
	boards := 0
	for _, q := range list {
		if q.Field == "circuit.rcd" {
			boards++
			if q.AboutKind != "board" || q.About != "DB1" || q.Ask == "" {
				t.Errorf("the device is asked as %+v", q)
			}
		}
	}
	if boards != 1 || total < len(list) {
		t.Errorf("%d questions about one board, %d in all of %d", boards, len(list), total)
	}
}
