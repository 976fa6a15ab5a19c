package pipeline

import (
	"context"
	"fmt"
	"math"
	"slices"
	"time"

	"pkvigil/db"
	"pkvigil/db/job"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/settings"
)

// anchorReach is how far the constant of a reference may be from that of a
// sample it anchors, in pKa: beyond it the two lean on other buffers.
const anchorReach = 1.5

// earlierReferences lists the reference sets of the night of a set on the same
// instrument that were measured before it.
func (s *Service) earlierReferences(ctx context.Context, x *db.Set) ([]db.Set, error) {
	if x.Kind == db.KindReference || x.LastScanAt.IsZero() {
		return nil, nil
	}
	sets, err := s.store.SetsOfNight(ctx, nil, x.Night, x.Instrument)
	if err != nil {
		return nil, err
	}
	return slices.DeleteFunc(sets, func(r db.Set) bool {
		return r.Kind != db.KindReference || r.LastScanAt.IsZero() || !r.LastScanAt.Before(x.LastScanAt)
	}), nil
}

// awaitReferences waits for references measured before a set whose computation
// is under way, so that what a set leans on does not depend on which of two
// workers was faster. References come first in the queue; one that does not
// get done holds nobody up for long.
func (s *Service) awaitReferences(ctx context.Context, a job.Set) error {
	x, err := s.store.SetByID(ctx, nil, a.SetID)
	if err != nil {
		return err
	}
	pause := 5 * time.Millisecond
	for end := time.Now().Add(10 * time.Second); time.Now().Before(end); pause = min(2*pause, 200*time.Millisecond) {
		refs, err := s.earlierReferences(ctx, x)
		if err != nil {
			return err
		}
		if !slices.ContainsFunc(refs, func(r db.Set) bool { return r.State == db.SetComplete }) {
			return nil
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-time.After(pause):
		}
	}
	return nil
}

// findAnchor names the reference result that a result may lean on: of the same
// night, instrument, electrode and calibration, measured before it, of the
// same charge type, and within reach of its first constant; the nearest in
// pKa, of several sets the last. None: u is left as it is.
func (s *Service) findAnchor(ctx context.Context, in *assay.Input, u *used, data *db.SetData, out *assay.Outcome) error {
	if in.Compound == nil || len(out.Constants) == 0 || u.CalibrationID == 0 || u.Electrode == "" {
		return nil
	}
	refs, err := s.earlierReferences(ctx, &data.Set)
	if err != nil {
		return err
	}
	cfg := set(s)
	pka := out.Constants[0].PKa
	distance := func(r db.Set) float64 {
		c := cfg.CompoundByName(r.Compound)
		if c == nil || c.Assigned == 0 || c.Charge != in.Compound.Charge {
			return math.Inf(1)
		}
		return math.Abs(c.Assigned - pka)
	}
	refs = slices.DeleteFunc(refs, func(r db.Set) bool { return !(distance(r) <= anchorReach) || r.State != db.SetFitted })
	slices.SortStableFunc(refs, func(a, b db.Set) int {
		if d := distance(a) - distance(b); math.Abs(d) > 1e-9 {
			return int(math.Copysign(1, d))
		}
		return b.LastScanAt.Compare(a.LastScanAt)
	})
	for _, x := range refs {
		r, err := s.store.CurrentResult(ctx, nil, x.ID)
		if err != nil {
			return err
		}
		if r == nil || (r.Verdict != db.Stands && r.Verdict != db.StandsNoted) || r.CalibrationID == nil || *r.CalibrationID != u.CalibrationID || len(r.PKa) != 1 {
			continue
		}
		rec, err := s.recordUsed(ctx, r.ID)
		if err != nil {
			return err
		}
		if rec.Electrode == u.Electrode {
			u.AnchorID = r.ID
			return nil
		}
	}
	return nil
}

// recordUsed is what a stored result read.
func (s *Service) recordUsed(ctx context.Context, id int64) (used, error) {
	rec, err := s.resultRecord(ctx, nil, id)
	return rec.Used, err
}

// anchor states the constants of a result relative to a reference of the same
// night: what both lean on cancels, by the keys of their budgets. It stands
// beside the plain value, and only where it is the more certain one.
func (s *Service) anchor(ctx context.Context, r *db.Result, c *settings.Compound, id int64) error {
	if id == 0 || c == nil {
		return nil
	}
	ref, err := s.store.ResultByID(ctx, nil, id)
	if err != nil {
		return fmt.Errorf("reference that anchors it: %w", err)
	}
	x, err := s.store.SetByID(ctx, nil, ref.SetID)
	if err != nil {
		return err
	}
	for i := range r.PKa {
		// The charge type of the first constant was compared; further ones differ from it.
		if i > 0 || len(ref.PKa) == 0 || ref.Constant != r.Constant {
			break
		}
		v, u, ok := anchored(r.PKa[i].PKa, fit.ForStep(r.Components, i), ref.PKa[0], fit.ForStep(ref.Components, 0))
		if ok && u < r.PKa[i].U {
			r.PKa[i].Anchored, r.PKa[i].UAnchored, r.PKa[i].AnchoredTo = v, u, x.Key
		}
	}
	return nil
}

// anchored is pKa + (assigned - measured) of a reference, with its uncertainty
// by the law of propagation: variances of both, twice their covariance off,
// and that of the assigned value.
func anchored(pka float64, own []fit.Component, ref db.PKa, its []fit.Component) (v, u float64, ok bool) {
	if math.IsNaN(ref.Assigned) || math.IsNaN(ref.UAssigned) || math.Abs(ref.Assigned-pka) > anchorReach || len(own) == 0 || len(its) == 0 {
		return math.NaN(), math.NaN(), false
	}
	w := fit.Variance(own) + fit.Variance(its) - 2*fit.Covariance(own, its) + ref.UAssigned*ref.UAssigned
	if !(w > 0) {
		return math.NaN(), math.NaN(), false
	}
	return pka + ref.Assigned - ref.PKa, math.Sqrt(w), true
}
