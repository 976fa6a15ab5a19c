package db

import (
	"context"
	"errors"
	"io"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/parse"
)

var errLater = errors.ErrUnsupported

// TakeFile stores one file, its bytes and its records, and fills in the ids.
func (s *Store) TakeFile(ctx context.Context, tx pgx.Tx, t *Taken) error { return errLater }

// TakeBatch stores many files in few round trips. It fails or succeeds as one.
func (s *Store) TakeBatch(ctx context.Context, tx pgx.Tx, ts []*Taken) error { return errLater }

// PutContent stores the records of a file that is already there: a parked one that was adopted.
func (s *Store) PutContent(ctx context.Context, tx pgx.Tx, fileID int64, c *parse.Content, instruments func(parse.Event) []string) (Stored, error) {
	return Stored{}, errLater
}

// PutEvents stores events entered by command.
func (s *Store) PutEvents(ctx context.Context, tx pgx.Tx, events []EventRow) error { return errLater }

// FileByHash gives the first taken file with these bytes, nil when none.
func (s *Store) FileByHash(ctx context.Context, q Querier, sum [32]byte) (*File, error) {
	return nil, errLater
}

// FilesByHash gives, for each hash known, the first file with these bytes.
func (s *Store) FilesByHash(ctx context.Context, q Querier, sums [][32]byte) (map[[32]byte]*File, error) {
	return nil, errLater
}

// LatestByPath gives the newest revision of a path, nil when none.
func (s *Store) LatestByPath(ctx context.Context, q Querier, root, path string) (*File, error) {
	return nil, errLater
}

// LatestByPaths gives the newest revision of each path known.
func (s *Store) LatestByPaths(ctx context.Context, q Querier, root string, paths []string) (map[string]*File, error) {
	return nil, errLater
}

// FileByID gives a file.
func (s *Store) FileByID(ctx context.Context, q Querier, id int64) (*File, error) {
	return nil, errLater
}

// FilesLike finds newest revisions whose path ends in, or contains, the text: for commands that people type.
func (s *Store) FilesLike(ctx context.Context, q Querier, text string, limit int) ([]File, error) {
	return nil, errLater
}

// FilesIn gives files in a state, seen in a span of time, oldest first.
func (s *Store) FilesIn(ctx context.Context, q Querier, state string, from, to time.Time) ([]File, error) {
	return nil, errLater
}

// SetFileState changes the state of a file and keeps a row about it.
func (s *Store) SetFileState(ctx context.Context, tx pgx.Tx, fileID int64, state string, at time.Time, actor, why string) error {
	return errLater
}

// Bytes gives the raw bytes of a hash.
func (s *Store) Bytes(ctx context.Context, q Querier, sum [32]byte) ([]byte, error) {
	return nil, errLater
}

// EnsureSet finds or makes the set with the key of set and fills the rest in from the database; a new one starts at revision 0, gathering.
// The row stays locked until the transaction ends.
func (s *Store) EnsureSet(ctx context.Context, tx pgx.Tx, set *Set) (made bool, err error) {
	return false, errLater
}

// AddMember puts a file or trace into a set; the same one again changes nothing and gives the same id.
func (s *Store) AddMember(ctx context.Context, tx pgx.Tx, m *Member) (added bool, err error) {
	return false, errLater
}

// AddMembers is AddMember for many in one round trip.
func (s *Store) AddMembers(ctx context.Context, tx pgx.Tx, ms []*Member) error { return errLater }

// RetireMember makes a member inactive and says why. Members are never deleted.
func (s *Store) RetireMember(ctx context.Context, tx pgx.Tx, memberID int64, at time.Time, why string) error {
	return errLater
}

// RetireFile makes every active member of a file inactive and gives the sets touched.
func (s *Store) RetireFile(ctx context.Context, tx pgx.Tx, fileID int64, at time.Time, why string) (sets []int64, err error) {
	return nil, errLater
}

// TouchSet counts a change of a set's content: revision+1, last seen. It gives the new revision.
func (s *Store) TouchSet(ctx context.Context, tx pgx.Tx, setID int64, seen time.Time) (revision int, err error) {
	return 0, errLater
}

// SetSetState moves a set to a state; a row of its history is kept when the state or what is missing changed.
func (s *Store) SetSetState(ctx context.Context, tx pgx.Tx, setID int64, state string, missing []Missing, deadline, at time.Time) error {
	return errLater
}

// SetTimes stores the newest scan moment and the arrival of pH; zero leaves as is, an earlier scan moment does too.
func (s *Store) SetTimes(ctx context.Context, tx pgx.Tx, setID int64, lastScan, ph time.Time) error {
	return errLater
}

// OpenSets gives sets gathering or waiting with a summary of what they have.
func (s *Store) OpenSets(ctx context.Context, q Querier) ([]OpenSet, error) { return nil, errLater }

// OpenSetsOf is OpenSets for the given ids, whatever their state.
func (s *Store) OpenSetsOf(ctx context.Context, q Querier, ids []int64) ([]OpenSet, error) {
	return nil, errLater
}

// SetByID gives a set.
func (s *Store) SetByID(ctx context.Context, q Querier, id int64) (*Set, error) { return nil, errLater }

// SetByKey gives a set by its key.
func (s *Store) SetByKey(ctx context.Context, q Querier, key string) (*Set, error) {
	return nil, errLater
}

// SetsLike finds sets by key, by name, or by a part of the key, newest first: for commands that people type.
func (s *Store) SetsLike(ctx context.Context, q Querier, text string, limit int) ([]Set, error) {
	return nil, errLater
}

// SetsOfNight gives the sets of a night in order of first file; instrument "" means all.
func (s *Store) SetsOfNight(ctx context.Context, q Querier, night, instrument string) ([]Set, error) {
	return nil, errLater
}

// Members gives the members of a set, inactive ones included.
func (s *Store) Members(ctx context.Context, q Querier, setID int64) ([]Member, error) {
	return nil, errLater
}

// LoadSet reads everything a computation of a set needs, in one snapshot.
func (s *Store) LoadSet(ctx context.Context, setID int64) (*SetData, error) { return nil, errLater }

// AdoptFile places a file (all its traces) in a set by hand: members are added, the file counts as taken, the set is touched. It gives the set's new revision.
func (s *Store) AdoptFile(ctx context.Context, tx pgx.Tx, fileID, setID int64, role, rung string, at time.Time, actor, because string) (revision int, err error) {
	return 0, errLater
}

// CalibrationBefore gives the newest calibration of an electrode at or before a moment, nil when none.
func (s *Store) CalibrationBefore(ctx context.Context, q Querier, electrode string, at time.Time) (*CalibrationRow, error) {
	return nil, errLater
}

// CalibrationsOf gives calibrations of an electrode since a moment, oldest first; electrode "" means all.
func (s *Store) CalibrationsOf(ctx context.Context, q Querier, electrode string, since time.Time) ([]CalibrationRow, error) {
	return nil, errLater
}

// PutCalibrationFigures stores what was computed from a calibration.
func (s *Store) PutCalibrationFigures(ctx context.Context, tx pgx.Tx, calibrationID int64, f CalibrationFigures, at time.Time) error {
	return errLater
}

// EventsBetween gives events in a span of time, oldest first.
func (s *Store) EventsBetween(ctx context.Context, q Querier, from, to time.Time) ([]EventRow, error) {
	return nil, errLater
}

// ResourceInUse gives the resource of a kind that the newest event at or before a moment put in use on an instrument, nil when none.
func (s *Store) ResourceInUse(ctx context.Context, q Querier, instrument, kind string, at time.Time) (*ResourceUse, error) {
	return nil, errLater
}

// PlanOf gives the newest plan of a night; instrument "" means all.
func (s *Store) PlanOf(ctx context.Context, q Querier, night, instrument string) ([]PlanRow, error) {
	return nil, errLater
}

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
