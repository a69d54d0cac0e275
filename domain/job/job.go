// Package job runs the work that nobody waits for: reviews that are owed, reviews whose time has come, the totals that
// monitoring reads, and the clearing away of what is kept for a time only. Any number of programs may run it beside each
// other on one database; each piece of work is safe to do twice. It is the only room that knows the job library.
package job

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/riverqueue/river"
	"github.com/riverqueue/river/riverdriver/riverpgxv5"
	"github.com/riverqueue/river/rivermigrate"
	"github.com/riverqueue/river/rivertype"

	"lampward/domain/access"
	"lampward/domain/review"
)

// Options is what the jobs need.
type Options struct {
	Pool     *pgxpool.Pool
	Reviewer *review.Reviewer
	Clock    func() time.Time // time.Now where nil
	Log      *slog.Logger
	// Reviewed is told how long each review that was owed took; may be nil.
	Reviewed func(took time.Duration)
	// Every is how often what is owed is looked for; 2 s where 0.
	Every time.Duration
}

// Jobs is the running work.
type Jobs struct{ client *river.Client[pgx.Tx] }

// Migrate brings the tables of the job library up to date. It is safe beside other programs.
func Migrate(ctx context.Context, pool *pgxpool.Pool) error {
	m, err := rivermigrate.New(riverpgxv5.New(pool), &rivermigrate.Config{Logger: slog.New(slog.DiscardHandler)})
	if err != nil {
		return fmt.Errorf("job: %w", err)
	}
	if _, err := m.Migrate(ctx, rivermigrate.DirectionUp, nil); err != nil {
		return fmt.Errorf("job: %w", err)
	}
	return nil
}

// task is one kind of repeated work.
type task struct {
	kind  string
	every time.Duration
	limit time.Duration // how long one run may take
	do    func(context.Context, Options) error
}

func tasks(o Options) []task {
	return []task{
		{"drain_reviews", o.Every, 10 * time.Minute, drain},
		{"recheck_trees", 30 * o.Every, 10 * time.Minute, recheck},
		{"count_totals", 15 * o.Every, 2 * time.Minute, func(ctx context.Context, o Options) error {
			return review.CountTotals(ctx, o.Pool, o.Clock())
		}},
		{"forget_answers", 1800 * o.Every, 2 * time.Minute, func(ctx context.Context, o Options) error {
			_, err := access.ForgetAnswers(ctx, o.Pool, o.Clock())
			return err
		}},
	}
}

// drain does the reviews that are owed until none is left, or the run's time is up: the rest stays owed.
func drain(ctx context.Context, o Options) error {
	for {
		began := time.Now()
		did, err := o.Reviewer.DrainOne(ctx, o.Pool, o.Clock)
		if err != nil || !did {
			return err
		}
		if o.Reviewed != nil {
			o.Reviewed(time.Since(began))
		}
	}
}

// recheck judges again the trees whose time has come, a thousand at a time.
func recheck(ctx context.Context, o Options) error {
	const most = 1000
	for {
		n, err := o.Reviewer.RecheckDue(ctx, o.Pool, o.Clock, most)
		if err != nil || n < most {
			return err
		}
	}
}

// Args is what a job is told: its kind alone. What there is to do stands in the database.
type Args struct {
	Name string `json:"name"`
}

// Kind names the one kind of job the library sees.
func (Args) Kind() string { return "lampward_task" }

type worker struct {
	river.WorkerDefaults[Args]
	o     Options
	tasks map[string]task
}

func (w *worker) Timeout(j *river.Job[Args]) time.Duration {
	if t, ok := w.tasks[j.Args.Name]; ok {
		return t.limit
	}
	return time.Minute
}

func (w *worker) Work(ctx context.Context, j *river.Job[Args]) error {
	t, ok := w.tasks[j.Args.Name]
	if !ok {
		// A newer program asked for it: that one will do it.
		return river.JobCancel(fmt.Errorf("job: this program has no task %q", j.Args.Name))
	}
	return t.do(ctx, w.o)
}

// Start begins the work in the background. It fails where the job library's tables are not there.
func Start(ctx context.Context, o Options) (*Jobs, error) {
	if o.Clock == nil {
		o.Clock = time.Now
	}
	if o.Every == 0 {
		o.Every = 2 * time.Second
	}
	w := &worker{o: o, tasks: map[string]task{}}
	var periodic []*river.PeriodicJob
	for _, t := range tasks(o) {
		w.tasks[t.kind] = t
		periodic = append(periodic, river.NewPeriodicJob(river.PeriodicInterval(t.every), func() (river.JobArgs, *river.InsertOpts) {
			// One of each at a time in the whole estate: a slow run is not joined by another.
			return Args{t.kind}, &river.InsertOpts{MaxAttempts: 1, UniqueOpts: river.UniqueOpts{ByArgs: true,
				ByState: []rivertype.JobState{rivertype.JobStateAvailable, rivertype.JobStatePending, rivertype.JobStateRunning, rivertype.JobStateRetryable, rivertype.JobStateScheduled}}}
		}, &river.PeriodicJobOpts{RunOnStart: true}))
	}
	workers := river.NewWorkers()
	river.AddWorker(workers, w)
	client, err := river.NewClient(riverpgxv5.New(o.Pool), &river.Config{
		Logger:                      o.Log,
		Queues:                      map[string]river.QueueConfig{river.QueueDefault: {MaxWorkers: 4}},
		Workers:                     workers,
		PeriodicJobs:                periodic,
		CompletedJobRetentionPeriod: 10 * time.Minute,
		CancelledJobRetentionPeriod: time.Hour,
		DiscardedJobRetentionPeriod: 24 * time.Hour,
		RescueStuckJobsAfter:        15 * time.Minute,
	})
	if err != nil {
		return nil, fmt.Errorf("job: %w", err)
	}
	if err := client.Start(ctx); err != nil {
		return nil, fmt.Errorf("job: %w", err)
	}
	return &Jobs{client}, nil
}

// Stop lets the jobs that run finish until ctx ends, then cuts them off: what they had not done stays owed.
func (j *Jobs) Stop(ctx context.Context) error {
	err := j.client.Stop(ctx)
	if errors.Is(err, context.DeadlineExceeded) || errors.Is(err, context.Canceled) {
		hard, cancel := context.WithTimeout(context.WithoutCancel(ctx), 5*time.Second)
		defer cancel()
		return j.client.StopAndCancel(hard)
	}
	return err
}
