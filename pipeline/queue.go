package pipeline

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/riverqueue/river"
	"github.com/riverqueue/river/riverdriver/riverpgxv5"
	"github.com/riverqueue/river/rivertype"
	"github.com/rs/zerolog"

	"pkvigil/db"
	"pkvigil/db/job"
)

// The queue looks for work this often; its default of 100 ms would cost a
// tenth of a second per job with two workers.
const queueCooldown = 5 * time.Millisecond

// setWorker computes one set.
type setWorker struct {
	river.WorkerDefaults[job.Set]
	s *Service
}

// Work computes the set and records the outcome and the end of the job in one transaction.
func (w *setWorker) Work(ctx context.Context, j *river.Job[job.Set]) (err error) {
	defer fence(&err, fmt.Sprintf("set %d", j.Args.SetID))
	if err := w.s.awaitReferences(ctx, j.Args); err != nil {
		return err
	}
	return w.s.computeSet(ctx, j.Args, func(ctx context.Context, tx pgx.Tx) error {
		_, err := river.JobCompleteTx[*riverpgxv5.Driver](ctx, tx, j)
		return err
	})
}

// Timeout bounds one computation.
func (w *setWorker) Timeout(*river.Job[job.Set]) time.Duration { return w.s.jobTimeout() }

// NextRetry is soon: the usual reason is a database that was away.
func (w *setWorker) NextRetry(j *river.Job[job.Set]) time.Time {
	return time.Now().Add(retryAfter(j.Attempt, time.Minute))
}

// deliverWorker sends one message to one receiver.
type deliverWorker struct {
	river.WorkerDefaults[job.Deliver]
	s *Service
}

// Work sends and records the attempt.
func (w *deliverWorker) Work(ctx context.Context, j *river.Job[job.Deliver]) (err error) {
	defer fence(&err, fmt.Sprintf("delivery %d", j.Args.DeliveryID))
	return w.s.deliver(ctx, j.Args.DeliveryID, func(ctx context.Context, tx pgx.Tx) error {
		_, err := river.JobCompleteTx[*riverpgxv5.Driver](ctx, tx, j)
		return err
	})
}

// Timeout bounds one attempt.
func (w *deliverWorker) Timeout(*river.Job[job.Deliver]) time.Duration { return time.Minute }

// NextRetry grows to an hour: a receiver that is down is tried until it is back.
func (w *deliverWorker) NextRetry(j *river.Job[job.Deliver]) time.Time {
	return time.Now().Add(retryAfter(j.Attempt, time.Hour))
}

// retryAfter doubles from two seconds up to a bound.
func retryAfter(attempt int, most time.Duration) time.Duration {
	d := 2 * time.Second << min(max(attempt-1, 0), 12)
	return min(d, most)
}

// fence turns a panic into an error of this one job.
func fence(err *error, what string) {
	if r := recover(); r != nil {
		*err = fmt.Errorf("%s: panic: %v", what, r)
	}
}

func (s *Service) jobTimeout() time.Duration {
	set, _, _ := s.current()
	if t := set.Storage.JobTimeout; t > 0 {
		return t
	}
	return 30 * time.Second
}

// openQueue makes the queue's client; with Work it also takes jobs once started.
func (s *Service) openQueue(ctx context.Context) error {
	cfg := &river.Config{
		Schema:               "pkvigil",
		FetchCooldown:        queueCooldown,
		FetchPollInterval:    500 * time.Millisecond,
		RescueStuckJobsAfter: 2*s.jobTimeout() + time.Minute,
		JobTimeout:           s.jobTimeout(),
		MaxAttempts:          1000, // a database that is away for a night must not use them up
		Logger:               slog.New(queueLogger{s.log.With().Str("part", "queue").Logger()}),
		ErrorHandler:         &jobErrors{s},
	}
	if s.cfg.Work {
		workers := river.NewWorkers()
		river.AddWorker(workers, &setWorker{s: s})
		river.AddWorker(workers, &deliverWorker{s: s})
		cfg.Workers = workers
		cfg.Queues = map[string]river.QueueConfig{
			job.QueueSets:     {MaxWorkers: s.workers()},
			job.QueueMessages: {MaxWorkers: 4},
		}
	}
	c, err := river.NewClient(riverpgxv5.New(s.store.Pool()), cfg)
	if err != nil {
		return fmt.Errorf("job queue: %w", err)
	}
	s.queue = c
	return nil
}

// startQueue gives back jobs that a dead worker of this machine left running
// and begins to work.
func (s *Service) startQueue(ctx context.Context) error {
	if s.server != nil && s.cfg.Sweep {
		// Nobody else can reach a private server, so a lease that still runs has lost its sweeper.
		if err := s.store.ResetLeases(ctx); err != nil {
			return err
		}
	}
	if !s.cfg.Work {
		return nil
	}
	if s.server != nil {
		// Nobody else can reach a private server, so a running job has lost its worker.
		n, err := s.store.ResetRunningJobs(ctx)
		if err != nil {
			return err
		}
		if n > 0 {
			s.log.Info().Int64("jobs", n).Msg("jobs that an interrupted run left are taken up again")
		}
	}
	if err := s.queue.Start(context.WithoutCancel(ctx)); err != nil {
		return fmt.Errorf("starting the job queue: %w", err)
	}
	s.defers("job queue", func(ctx context.Context) error {
		stopCtx, cancel := context.WithTimeout(ctx, 20*time.Second)
		defer cancel()
		if err := s.queue.Stop(stopCtx); err != nil {
			return s.queue.StopAndCancel(ctx)
		}
		return nil
	})
	return nil
}

// enqueueSet asks for a set to be computed, within the transaction of what it is about.
func (s *Service) enqueueSet(ctx context.Context, tx pgx.Tx, a job.Set) error {
	x, err := s.store.SetByID(ctx, tx, a.SetID)
	if err != nil {
		return err
	}
	priority := 1 // references first: samples lean on them
	if x.Kind == db.KindSample {
		priority = 2
	}
	_, err = s.queue.InsertTx(ctx, tx, a, &river.InsertOpts{Queue: job.QueueSets, Priority: priority, UniqueOpts: river.UniqueOpts{ByArgs: true}})
	return err
}

// enqueueDeliveries asks for stored messages to be sent.
func (s *Service) enqueueDeliveries(ctx context.Context, tx pgx.Tx, ids []int64) error {
	var many []river.InsertManyParams
	for _, id := range ids {
		many = append(many, river.InsertManyParams{Args: job.Deliver{DeliveryID: id}, InsertOpts: &river.InsertOpts{Queue: job.QueueMessages, UniqueOpts: river.UniqueOpts{ByArgs: true}}})
	}
	if len(many) == 0 {
		return nil
	}
	_, err := s.queue.InsertManyTx(ctx, tx, many)
	return err
}

// jobErrors logs a failing job when its error changes.
type jobErrors struct{ s *Service }

// HandleError logs; the job is tried again.
func (h *jobErrors) HandleError(_ context.Context, j *rivertype.JobRow, err error) *river.ErrorHandlerResult {
	if !errors.Is(err, context.Canceled) {
		h.s.once.note(h.s.log, fmt.Sprintf("job %s %s", j.Kind, j.EncodedArgs), err)
	}
	return nil
}

// HandlePanic cannot happen: fence turns panics into errors before the queue sees them.
func (h *jobErrors) HandlePanic(_ context.Context, j *rivertype.JobRow, v any, _ string) *river.ErrorHandlerResult {
	h.s.log.Error().Str("job", j.Kind).Interface("panic", v).Msg("job ended in a panic")
	return nil
}

// queueLogger hands the queue's own messages to zerolog, one level quieter:
// what matters to people is said by the service itself.
type queueLogger struct{ log zerolog.Logger }

// Enabled says that warnings and errors are wanted.
func (q queueLogger) Enabled(_ context.Context, l slog.Level) bool { return l >= slog.LevelWarn }

// Handle writes one record.
func (q queueLogger) Handle(_ context.Context, r slog.Record) error {
	e := q.log.Debug()
	if r.Level >= slog.LevelError {
		e = q.log.Warn()
	}
	r.Attrs(func(a slog.Attr) bool { e = e.Str(a.Key, db.Redact(a.Value.String())); return true })
	e.Msg(db.Redact(r.Message))
	return nil
}

// WithAttrs returns q: attributes of the queue's components add nothing for people.
func (q queueLogger) WithAttrs([]slog.Attr) slog.Handler { return q }

// WithGroup returns q.
func (q queueLogger) WithGroup(string) slog.Handler { return q }
