package pipeline

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"path"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/verdict"
)

const actCorrect = "correct" // the value of a buffer bottle; results that used it are computed again

// corrections gives the signed values of buffer bottles by lot.
func (s *Service) corrections(ctx context.Context, q db.Querier, lots []string) (map[string]float64, error) {
	var out map[string]float64
	for _, lot := range lots {
		deeds, err := s.store.Deeds(ctx, q, "buffer "+lot, 20)
		if err != nil {
			return nil, err
		}
		for _, d := range deeds { // newest first
			if d.Action != actCorrect {
				continue
			}
			v, err := strconv.ParseFloat(d.After, 64)
			if err != nil {
				return nil, fmt.Errorf("signed value of buffer %s: %w", lot, err)
			}
			if out == nil {
				out = map[string]float64{}
			}
			out[lot] = v
			break
		}
	}
	return out, nil
}

// correct signs the value of a buffer and asks for every set that was read
// with it to be computed again. The earlier results stay beside the new ones.
func (s *Service) correct(ctx context.Context, tx pgx.Tx, lot string, value float64, d *db.Deed) (string, error) {
	cals, err := s.store.CalibrationsOf(ctx, tx, "", time.Unix(0, 0).UTC())
	if err != nil {
		return "", err
	}
	used := map[int64]bool{}
	label := math.NaN()
	for _, c := range cals {
		for _, p := range c.Points {
			if p.Lot == lot {
				used[c.ID], label = true, p.PH
			}
		}
	}
	if len(used) == 0 {
		return "", fmt.Errorf("no calibration was made with buffer %q: %w", lot, ErrUnknownObject)
	}
	if math.Abs(value-label) > 0.5 {
		return "", fmt.Errorf("buffer %s is labelled %.3f; a true value of %.3f is further away than a correction can be", lot, label, value)
	}
	d.Action, d.Object, d.Before, d.After = actCorrect, "buffer "+lot, strconv.FormatFloat(label, 'g', -1, 64), strconv.FormatFloat(value, 'g', -1, 64)
	sets, err := s.store.SetsWithCalibrations(ctx, tx, used)
	if err != nil {
		return "", err
	}
	for _, id := range sets {
		set, err := s.store.SetByID(ctx, tx, id)
		if err != nil {
			return "", err
		}
		if err := s.again(ctx, tx, set, d); err != nil {
			return "", err
		}
	}
	return fmt.Sprintf("buffer %s counts as %.3f instead of %.3f; %d set(s) are computed again, the earlier results stay", lot, value, label, len(sets)), nil
}

// signCorrect reads the arguments of a correction by hand.
func (s *Service) signCorrect(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if len(g.Object) != 2 {
		return "", errors.New("name the buffer lot and its true pH at 25 °C: pkvigil sign correct CB-207 9.952 --as NAME --because WHY")
	}
	v, err := strconv.ParseFloat(strings.Replace(g.Object[1], ",", ".", 1), 64)
	if err != nil {
		return "", fmt.Errorf("pH %q: %w", g.Object[1], err)
	}
	return s.correct(ctx, tx, g.Object[0], v, d)
}

// signAccept accepts what the program proposed: the corrected value of a
// buffer for a case, the exchange of two labels for a set.
func (s *Service) signAccept(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if c, err := s.findCase(ctx, tx, g.Object[0]); err == nil {
		return s.acceptCase(ctx, tx, c, d)
	}
	r, set, err := s.findResult(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	var rec struct {
		Suspects []verdict.Suspect `json:"label_suspects"`
	}
	if err := json.Unmarshal(r.Record, &rec); err != nil {
		return "", fmt.Errorf("calculation record of result %d: %w", r.ID, err)
	}
	for _, x := range rec.Suspects {
		if x.Kind == "exchange" {
			g.Verb, g.Object = actExchange, []string{set.Key, x.A, x.B}
			d.Action = actExchange
			return s.signExchange(ctx, tx, g, d)
		}
	}
	return "", fmt.Errorf("nothing is proposed for %s: %w", set.Key, ErrUnknownObject)
}

func (s *Service) acceptCase(ctx context.Context, tx pgx.Tx, row *db.Case, d *db.Deed) (string, error) {
	c, err := caseOf(*row)
	if err != nil {
		return "", err
	}
	for _, k := range c.Explanation.Candidates {
		if k.Resource.Kind != drift.KindBuffer || len(k.Now) == 0 {
			continue
		}
		cals, err := s.store.CalibrationsOf(ctx, tx, "", time.Unix(0, 0).UTC())
		if err != nil {
			return "", err
		}
		for _, cal := range cals {
			for _, p := range cal.Points {
				if p.Lot == k.Resource.Name {
					return s.correct(ctx, tx, p.Lot, math.Round((p.PH+k.Now[0].Size)*1000)/1000, d)
				}
			}
		}
	}
	return "", fmt.Errorf("case %s proposes no correction: %w", row.Key, ErrUnknownObject)
}

// releaseNight releases every result of a night that stands and is not in question.
func (s *Service) releaseNight(ctx context.Context, tx pgx.Tx, night string, d *db.Deed) (string, error) {
	results, err := s.store.ResultsBetween(ctx, tx, night, night, "")
	if err != nil {
		return "", err
	}
	n := 0
	for _, r := range results {
		v := r.Standing.Verdict
		if r.Set.Kind != db.KindSample || r.Standing.InQuestion || !r.Standing.ReleasedAt.IsZero() || (v != db.Stands && v != db.StandsNoted && !r.Standing.Lifted) {
			continue
		}
		if err := s.store.PutResultStatus(ctx, tx, db.StatusRow{ResultID: r.ID, Status: db.StatusReleased, At: d.At, Actor: d.Actor, Because: d.Because}); err != nil {
			return "", err
		}
		n++
	}
	d.Object, d.After = "night "+night, fmt.Sprintf("%d results released", n)
	return d.After, nil
}

// signScripted turns a scripted signature into the command a person would type.
func (s *Service) signScripted(ctx context.Context, g rehearse.Signature) (string, error) {
	sig := Signature{Verb: g.Verb, Object: []string{g.Object}, As: g.As, Because: g.Because}
	switch g.Verb {
	case "adopt":
		return s.Adopt(ctx, Adoption{File: g.File, Set: g.Object, Rung: g.Rung, As: g.As, Because: g.Because})
	case actBaseline:
		from, to, err := s.quietNights(ctx, g.Object)
		if err != nil {
			return "", err
		}
		sig.Object = []string{g.Object, from, to}
	case actConfirm:
		sig.Object = []string{g.Object, "all"}
	}
	return s.Sign(ctx, sig)
}

// quietNights proposes the range for a new baseline: since the last thing that
// was changed on the instrument, up to now.
func (s *Service) quietNights(ctx context.Context, object string) (from, to string, err error) {
	inst, _, _ := strings.Cut(object, "/")
	now := s.clock.Now()
	zone := set(s).Zone()
	events, err := s.store.EventsBetween(ctx, nil, time.Unix(0, 0).UTC(), now)
	if err != nil {
		return "", "", err
	}
	from = "0001-01-01"
	for _, e := range events {
		switch e.Kind {
		case "lamp", "electrode", "wavelength", "service":
			if slices.Contains(e.Instruments, inst) {
				from = naming.NightOf(e.At, zone, naming.Noon)
			}
		}
	}
	points, err := s.store.History(ctx, nil, db.PointFilter{FromNight: from}, now)
	if err != nil {
		return "", "", err
	}
	first := ""
	for _, p := range points {
		name := p.Scope + "/" + p.Reference
		ok, err := path.Match(object, name)
		if err != nil {
			return "", "", fmt.Errorf("pattern %q: %w", object, err)
		}
		if ok || p.Reference == object {
			if first == "" || p.Night < first {
				first = p.Night
			}
			to = max(to, p.Night)
		}
	}
	if first == "" {
		return "", "", fmt.Errorf("no chart fits %q: %w", object, ErrUnknownObject)
	}
	return first, to, nil
}
