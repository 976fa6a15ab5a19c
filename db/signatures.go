package db

import (
	"context"
	"errors"
	"io"
	"time"

	"github.com/jackc/pgx/v5"
)

var errLater = errors.ErrUnsupported

// PutResult stores a result with all its parts, makes it current and the earlier one replaced. The same set revision, settings,
// program and input again store nothing: fresh is false and ID is that of the stored one. A result of an older set revision than the
// current one is stored as replaced.
func (s *Store) PutResult(ctx context.Context, tx pgx.Tx, r *Result) (fresh bool, err error) {
	return false, errLater
}

// PutResultStatus adds a row to what happened to a result.
func (s *Store) PutResultStatus(ctx context.Context, tx pgx.Tx, row StatusRow) error { return errLater }

// StatusRows gives what happened to a result, in order.
func (s *Store) StatusRows(ctx context.Context, q Querier, resultID int64) ([]StatusRow, error) {
	return nil, errLater
}

// MakeCurrent makes a stored result the current one of its set again.
func (s *Store) MakeCurrent(ctx context.Context, tx pgx.Tx, resultID int64, at time.Time, actor, because string) error {
	return errLater
}

// CurrentResult gives the current result of a set with all its parts, nil when none.
func (s *Store) CurrentResult(ctx context.Context, q Querier, setID int64) (*Result, error) {
	return nil, errLater
}

// ResultByID gives a result with all its parts.
func (s *Store) ResultByID(ctx context.Context, q Querier, id int64) (*Result, error) {
	return nil, errLater
}

// ResultsOfSet gives all results of a set, oldest first, without spectra and record.
func (s *Store) ResultsOfSet(ctx context.Context, q Querier, setID int64) ([]Summary, error) {
	return nil, errLater
}

// ResultsBetween gives the current results of nights from..to (YYYY-MM-DD, inclusive), without spectra and record; instrument "" means all.
func (s *Store) ResultsBetween(ctx context.Context, q Querier, from, to, instrument string) ([]Summary, error) {
	return nil, errLater
}

// PutPoints stores chart points, once each, and fills in their ids.
func (s *Store) PutPoints(ctx context.Context, tx pgx.Tx, points []Point) error { return errLater }

// History gives chart points at or before a moment, by series and time.
func (s *Store) History(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]Point, error) {
	return nil, errLater
}

// JudgedHistory is History with each point's newest judgement.
func (s *Store) JudgedHistory(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]JudgedPoint, error) {
	return nil, errLater
}

// PutBaseline stores the next version of a chart's baseline.
func (s *Store) PutBaseline(ctx context.Context, tx pgx.Tx, b *Baseline) error { return errLater }

// Baselines gives the newest version of each baseline that was made at or before a moment; f narrows as for History.
func (s *Store) Baselines(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]Baseline, error) {
	return nil, errLater
}

// PutPointJudgements stores what charts said of points; the same again changes nothing.
func (s *Store) PutPointJudgements(ctx context.Context, tx pgx.Tx, js []PointJudgement) error {
	return errLater
}

// PutCase opens a case or adds a state row to it when anything differs from the last.
func (s *Store) PutCase(ctx context.Context, tx pgx.Tx, c *Case) (changed bool, err error) {
	return false, errLater
}

// CaseByID gives a case as it stands.
func (s *Store) CaseByID(ctx context.Context, q Querier, id int64) (*Case, error) {
	return nil, errLater
}

// CaseByKey gives a case as it stands.
func (s *Store) CaseByKey(ctx context.Context, q Querier, key string) (*Case, error) {
	return nil, errLater
}

// OpenCases gives cases not closed, oldest first.
func (s *Store) OpenCases(ctx context.Context, q Querier) ([]Case, error) { return nil, errLater }

// Cases gives all cases opened at or before a moment, oldest first, as they stood then.
func (s *Store) Cases(ctx context.Context, q Querier, until time.Time) ([]Case, error) {
	return nil, errLater
}

// CaseHistory gives the states a case went through, in order.
func (s *Store) CaseHistory(ctx context.Context, q Querier, caseID int64) ([]Case, error) {
	return nil, errLater
}

// PutRanking stores one evaluation of a case's candidates.
func (s *Store) PutRanking(ctx context.Context, tx pgx.Tx, caseID int64, at time.Time, rows []RankRow) error {
	return errLater
}

// Ranking gives the newest ranking of a case, first first.
func (s *Store) Ranking(ctx context.Context, q Querier, caseID int64) ([]RankRow, time.Time, error) {
	return nil, time.Time{}, errLater
}

// PutReach stores which results a case touches; a later row for a result counts.
func (s *Store) PutReach(ctx context.Context, tx pgx.Tx, caseID int64, at time.Time, rows []ReachRow) error {
	return errLater
}

// Reach gives the newest row of each result a case touches.
func (s *Store) Reach(ctx context.Context, q Querier, caseID int64) ([]ReachRow, error) {
	return nil, errLater
}

// PutBracket stores a bracket as it is now, by key.
func (s *Store) PutBracket(ctx context.Context, tx pgx.Tx, b *Bracket) error { return errLater }

// Brackets gives the brackets of an instrument since a night, oldest first.
func (s *Store) Brackets(ctx context.Context, q Querier, instrument, sinceNight string) ([]Bracket, error) {
	return nil, errLater
}

// PutInstrumentState adds a row about an instrument being open or closed.
func (s *Store) PutInstrumentState(ctx context.Context, tx pgx.Tx, st InstrumentState) error {
	return errLater
}

// InstrumentStates gives the newest state of every instrument that has one.
func (s *Store) InstrumentStates(ctx context.Context, q Querier) (map[string]InstrumentState, error) {
	return nil, errLater
}

// PutMessage stores a message and one delivery per sink; a key that exists stores nothing and fresh is false.
func (s *Store) PutMessage(ctx context.Context, tx pgx.Tx, m *Message, sinks []string) (fresh bool, err error) {
	return false, errLater
}

// PendingDeliveries gives deliveries that are neither done nor given up, oldest first.
func (s *Store) PendingDeliveries(ctx context.Context, q Querier, limit int) ([]Delivery, error) {
	return nil, errLater
}

// DeliveryByID gives one delivery with its message.
func (s *Store) DeliveryByID(ctx context.Context, q Querier, id int64) (*Delivery, error) {
	return nil, errLater
}

// RecordDelivery adds an attempt: ok delivers, permanent gives up, neither leaves it pending.
func (s *Store) RecordDelivery(ctx context.Context, tx pgx.Tx, deliveryID int64, at time.Time, ok, permanent bool, errText string) error {
	return errLater
}

// LastSaid gives the newest message about a case, nil when none.
func (s *Store) LastSaid(ctx context.Context, q Querier, caseID int64) (*Said, error) {
	return nil, errLater
}

// SaidSince gives messages since a moment, oldest first; kind "" means all.
func (s *Store) SaidSince(ctx context.Context, q Querier, kind string, since time.Time) ([]Said, error) {
	return nil, errLater
}

// AppendDeed adds to the trail and fills in sequence and hashes. Deeds are serialised until the transaction ends, so append last.
func (s *Store) AppendDeed(ctx context.Context, tx pgx.Tx, d *Deed) error { return errLater }

// VerifyDeeds walks the chain: n entries are good; broken is the first that is not, nil when all are.
func (s *Store) VerifyDeeds(ctx context.Context) (n int, broken *Deed, err error) {
	return 0, nil, errLater
}

// Deeds gives the newest entries, newest first; object "" means all.
func (s *Store) Deeds(ctx context.Context, q Querier, object string, limit int) ([]Deed, error) {
	return nil, errLater
}

// NightCounts gives counts per night and instrument, nights from..to inclusive.
func (s *Store) NightCounts(ctx context.Context, q Querier, from, to string) ([]NightCount, error) {
	return nil, errLater
}

// HeldReasons gives the checks that hold or note current results of nights from..to.
func (s *Store) HeldReasons(ctx context.Context, q Querier, from, to string) ([]HeldReason, error) {
	return nil, errLater
}

// Gaps gives what waiting sets wait for.
func (s *Store) Gaps(ctx context.Context, q Querier) ([]Gap, error) { return nil, errLater }

// PlannedNotSeen gives planned sets of a night of which nothing has arrived.
func (s *Store) PlannedNotSeen(ctx context.Context, q Querier, night string) ([]NotSeen, error) {
	return nil, errLater
}

// CheckUse counts checks over nights from..to.
func (s *Store) CheckUse(ctx context.Context, q Querier, from, to string) ([]CheckUse, error) {
	return nil, errLater
}

// Dump writes every table in a canonical form: no surrogate ids, no wall times, sorted.
func (s *Store) Dump(ctx context.Context, w io.Writer) error { return errLater }
