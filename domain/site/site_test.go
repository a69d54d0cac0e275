package site_test

import (
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/site"

	"github.com/jackc/pgx/v5/pgxpool"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

func in(t *testing.T, db *pgxpool.Pool, building domain.ID, f func(domain.Scope) error) error {
	t.Helper()
	return domain.In(t.Context(), db, building, domaintest.Tester, domaintest.Noon, f)
}

// owed counts the reviews owed to a building.
func owed(t *testing.T, db *pgxpool.Pool, building domain.ID) (n int) {
	t.Helper()
	if err := db.QueryRow(t.Context(), `SELECT count(*) FROM review_due WHERE building_id = $1`, building).Scan(&n); err != nil {
		t.Fatal(err)
	}
	return n
}

func TestBuilding(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A")
	read := func() site.Building {
		t.Helper()
		got, err := site.GetBuilding(t.Context(), domain.On(db, b.ID, domaintest.Tester, domaintest.Noon), b.ID)
		if err != nil {
			t.Fatal(err)
		}
		return got
	}
	if got := read(); !site.Buildings.Same(&got, &b) || got.Version != 1 || got.CreatedAt.Location() != time.UTC {
		t.Errorf("reads back as %+v", got)
	}
	if err := in(t, db, domain.NewID(), func(s domain.Scope) error {
		twin := b
		return site.CreateBuilding(t.Context(), s, &twin)
	}); domain.KindOf(err) != domain.Conflict {
		t.Errorf("a second building of this code gives %v", err)
	}
	update := func(x *site.Building) error {
		return in(t, db, b.ID, func(s domain.Scope) error { return site.UpdateBuilding(t.Context(), s, x) })
	}
	// A note changes no finding; the mains do.
	x := read()
	x.Note, x.RetiredAt = "Invented", domaintest.Of(domaintest.Noon)
	if err := update(&x); err != nil {
		t.Fatal(err)
	}
	if got := read(); got.RetiredAt != nil || got.Note != "Invented" || got.Version != 2 {
		t.Errorf("a change retires the building or is not kept: %+v", got)
	}
	if n := owed(t, db, b.ID); n != 0 {
		t.Errorf("a note owes %d reviews", n)
	}
	x.MainsV = domaintest.Of(240.0)
	if err := update(&x); err != nil {
		t.Fatal(err)
	}
	if n := owed(t, db, b.ID); n != 1 {
		t.Errorf("another voltage owes %d reviews", n)
	}
	stale := x
	stale.Version = 1
	if err := update(&stale); domain.KindOf(err) != domain.Stale {
		t.Errorf("an old version gives %v", err)
	}

	turn := func(f func(s domain.Scope) (site.Building, error)) error {
		return in(t, db, b.ID, func(s domain.Scope) error { _, err := f(s); return err })
	}
	retire := func(version int64) error {
		return turn(func(s domain.Scope) (site.Building, error) { return site.RetireBuilding(t.Context(), s, version) })
	}
	restore := func(version int64) error {
		return turn(func(s domain.Scope) (site.Building, error) { return site.RestoreBuilding(t.Context(), s, version) })
	}
	if err := restore(3); domain.KindOf(err) != domain.Conflict {
		t.Errorf("restoring what is in use gives %v", err)
	}
	if err := retire(3); err != nil {
		t.Fatal(err)
	}
	if err := retire(4); domain.KindOf(err) != domain.Conflict {
		t.Errorf("retiring twice gives %v", err)
	}
	x = read()
	if err := update(&x); domain.KindOf(err) != domain.Conflict {
		t.Errorf("changing a retired building gives %v", err)
	}
	if err := restore(4); err != nil {
		t.Fatal(err)
	}
	if got := read(); got.RetiredAt != nil || got.Version != 5 {
		t.Errorf("restored as %+v", got)
	}
}

func TestBuildingRefused(t *testing.T) {
	t.Parallel()
	good := site.Building{Code: "A", Name: "Invented", TimeZone: "Europe/Dublin"}
	if err := good.Validate(); err != nil {
		t.Fatal(err)
	}
	for pointer, spoil := range map[string]func(*site.Building){
		"/code":           func(b *site.Building) { b.Code = "A B" },
		"/name":           func(b *site.Building) { b.Name = "\u200b" },
		"/address":        func(b *site.Building) { b.Address = "a\u202eb" },
		"/time_zone":      func(b *site.Building) { b.TimeZone = "../UTC" },
		"/mains_v":        func(b *site.Building) { b.MainsV = domaintest.Of(-230.0) },
		"/mains_hz":       func(b *site.Building) { b.MainsHz = domaintest.Of(0.0) },
		"/wiring_rules":   func(b *site.Building) { b.WiringRules = "none" },
		"/wiring_edition": func(b *site.Building) { b.WiringEdition = "a\x00" },
		"/cleanliness":    func(b *site.Building) { b.Cleanliness = "filthy" },
	} {
		b := good
		spoil(&b)
		if told := domain.FieldsOf(b.Validate()); len(told) != 1 || told[0].Pointer != pointer {
			t.Errorf("%s: %v", pointer, told)
		}
	}
	for _, zone := range []string{"", "Local", "Mars/Base", "/etc/passwd", "Europe/Dublin\x00"} {
		b := good
		b.TimeZone = zone
		if b.Validate() == nil {
			t.Errorf("the zone %q passes", zone)
		}
	}
}

func TestRate(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A")
	make := func(r *site.Rate) error {
		return in(t, db, b.ID, func(s domain.Scope) error { return site.CreateRate(t.Context(), s, r) })
	}
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	on := func(day domain.Date) string {
		t.Helper()
		r, ok, err := site.RateOn(t.Context(), domain.On(db, b.ID, domaintest.Tester, domaintest.Noon), site.EnergyRate, day)
		must(err)
		if !ok {
			return "none"
		}
		return string(r.Amount) + " " + r.Currency
	}
	first := site.Rate{Rate: site.EnergyRate, FromDate: "2025-01-01", Amount: "0.20", Currency: "EUR"}
	must(make(&first))
	second := site.Rate{Rate: site.EnergyRate, FromDate: "2026-01-01", Amount: "0.2512", Currency: "EUR"}
	must(make(&second))
	for day, want := range map[domain.Date]string{"2024-12-31": "none", "2025-01-01": "0.20 EUR", "2025-12-31": "0.20 EUR", "2026-01-01": "0.2512 EUR"} {
		if got := on(day); got != want {
			t.Errorf("on %s: %s, want %s", day, got, want)
		}
	}
	twin := site.Rate{Rate: site.EnergyRate, FromDate: "2026-01-01", Amount: "0.30", Currency: "EUR"}
	if err := make(&twin); domain.KindOf(err) != domain.Conflict {
		t.Errorf("a second rate of one day gives %v", err)
	}
	// A retired rate stands in nobody's way, and cannot come back where another took its place.
	must(in(t, db, b.ID, func(s domain.Scope) (err error) {
		second, err = site.RetireRate(t.Context(), s, second.ID, 1)
		return err
	}))
	if got := on("2026-02-01"); got != "0.20 EUR" {
		t.Errorf("after retiring: %s", got)
	}
	if err := in(t, db, b.ID, func(s domain.Scope) error { _, err := site.RetireRate(t.Context(), s, second.ID, 2); return err }); domain.KindOf(err) != domain.Conflict {
		t.Errorf("retiring twice gives %v", err)
	}
	twin.ID = domain.ID{}
	must(make(&twin))
	if err := in(t, db, b.ID, func(s domain.Scope) error { _, err := site.RestoreRate(t.Context(), s, second.ID, 2); return err }); domain.KindOf(err) != domain.Conflict {
		t.Errorf("restoring over another gives %v", err)
	}
	if err := in(t, db, b.ID, func(s domain.Scope) error { return site.UpdateRate(t.Context(), s, &second) }); domain.KindOf(err) != domain.Conflict {
		t.Errorf("changing a retired rate gives %v", err)
	}
	twin.Amount = "0.31"
	must(in(t, db, b.ID, func(s domain.Scope) error { return site.UpdateRate(t.Context(), s, &twin) }))
	if got := on("2026-02-01"); got != "0.31 EUR" {
		t.Errorf("after a change: %s", got)
	}
	// Of two currencies from one day, the first by code.
	must(make(&site.Rate{Rate: site.EnergyRate, FromDate: "2026-01-01", Amount: "1.50", Currency: "AED"}))
	if got := on("2026-02-01"); got != "1.50 AED" {
		t.Errorf("of two currencies: %s", got)
	}

	for pointer, r := range map[string]site.Rate{
		"/rate":      {FromDate: "2026-01-01", Amount: "1", Currency: "EUR"},
		"/from_date": {Rate: site.LabourRate, FromDate: "2026-02-30", Amount: "1", Currency: "EUR"},
		"/amount":    {Rate: site.LabourRate, FromDate: "2026-01-01", Amount: "-1", Currency: "EUR"},
		"/currency":  {Rate: site.LabourRate, FromDate: "2026-01-01", Amount: "1", Currency: "eur"},
	} {
		if told := domain.FieldsOf(make(&r)); len(told) != 1 || told[0].Pointer != pointer {
			t.Errorf("%s: %v", pointer, told)
		}
	}
	if err := make(&site.Rate{Rate: site.DiscountRate, FromDate: "2026-01-01", Amount: "4", Currency: "EUR"}); domain.FieldsOf(err) == nil {
		t.Error("a discount in a currency passes")
	}
}

func TestSpaceRefused(t *testing.T) {
	t.Parallel()
	s := site.Space{Name: "Hall", Permits: []string{"hot work", "a\u200bb"}, YearlyHours: domaintest.Of(8785.0), AreaM2: domaintest.Of(-1.0),
		Asbestos: "perhaps", FactSource: "rumour"}
	got := map[string]bool{}
	for _, f := range domain.FieldsOf(s.Validate()) {
		got[f.Pointer] = true
	}
	for _, want := range []string{"/permits/1", "/yearly_hours", "/area_m2", "/asbestos", "/fact_source"} {
		if !got[want] {
			t.Errorf("%s passes: %v", want, got)
		}
	}
	if len(got) != 5 {
		t.Errorf("told %v", got)
	}
}
