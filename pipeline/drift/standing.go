package drift

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// standing fills what the last night alone says: which cells were observed,
// which are inside their limits, and how open cases stand.
func (l *look) standing(ev *Evaluation) {
	t := l.nights - 1
	for i := range l.cells {
		s := &l.cells[i]
		n := len(s.obs)
		if n == 0 || s.obs[n-1].night != t {
			continue
		}
		ev.Observed = append(ev.Observed, s.c.Key)
		if s.inside(s.obs[n-1]) {
			ev.Inside = append(ev.Inside, s.c.Key)
		} else {
			ev.Outside = append(ev.Outside, s.c.Key)
		}
	}
	for _, w := range l.h.Watch {
		ev.Watched = append(ev.Watched, l.watched(w))
	}
}

// inside reports whether one night's values lie within the limits of the cell:
// each within three standard deviations, all together within the 99.9 % region.
func (s *seen) inside(o obs) bool {
	k := s.c.k
	n := 0
	cov := make([]float64, k*k)
	var idx []int
	for j := range k {
		if o.have[j] {
			idx = append(idx, j)
		}
		for i := range k {
			cov[j*k+i] = s.c.cov[j*k+i] / float64(o.sets)
			if s.c.night != nil {
				cov[j*k+i] += s.c.night[j*k+i]
			}
			if s.c.base != nil {
				cov[j*k+i] += s.c.base[j*k+i]
			}
		}
	}
	n = len(idx)
	y := pickedVector(o.y, idx)
	sub := picked(cov, k, idx)
	for a := range n {
		if math.Abs(y[a]) > 3.5*math.Sqrt(sub[a*n+a]) {
			return false
		}
	}
	w, ok := inverse(sub, n)
	if !ok {
		return true
	}
	return mathext.GammaIncRegComp(float64(n)/2, dot(y, times(w, y, n))/2) > 0.001
}

// watched estimates, from the last night alone, how much of a disturbance is left.
func (l *look) watched(w Watch) Watched {
	out := Watched{CaseID: w.CaseID, Share: math.NaN()}
	last := l.nights - 1
	for i := range l.scopes {
		s := &l.scopes[i]
		tr := l.m.traits[s.trait]
		if tr.Cause != w.Candidate.Cause || s.res != w.Candidate.Resource || len(w.Candidate.Theta) != tr.Columns {
			continue
		}
		shape := w.Candidate.Shape
		if shape == ShapeUntil {
			shape = ShapeStep
		}
		onset := max(0, int(w.Candidate.Since.Best-l.h.First))
		if onset >= l.nights {
			return out
		}
		course := l.course(s, l.resetting(s, shape), onset)[last]
		if w.Candidate.Since.Best < l.h.First && shape == ShapeRamp {
			course += float64(l.h.First - w.Candidate.Since.Best)
		}
		var num, den float64
		for a, c := range s.cells {
			cl := &l.cells[c]
			n := len(cl.obs)
			if n == 0 || cl.obs[n-1].night != last || !s.nights[a][last] {
				continue
			}
			out.Data = true
			x := make([]float64, cl.c.k)
			for col, th := range w.Candidate.Theta {
				for j := range x {
					if cl.obs[n-1].have[j] {
						x[j] += course * th * cl.c.cols[s.trait][col*cl.c.k+j]
					}
				}
			}
			wx := times(cl.obs[n-1].key.w, x, cl.c.k)
			num += dot(wx, cl.obs[n-1].y)
			den += dot(wx, x)
		}
		out.Retired = !out.Data && l.retired(s, tr.Role)
		if den > 0 {
			out.Expected, out.Share = math.Sqrt(den), num/den
			out.Inside = out.Expected >= 2 && (out.Share < 0.25 || (out.Share < 0.5 && num/math.Sqrt(den) < 2.5))
		}
		return out
	}
	return out
}

// resetting is the course to expect of a cause that calibrations undo: a ramp
// starts again at each of them.
func (l *look) resetting(s *scope, sh Shape) Shape {
	if l.m.traits[s.trait].Reset != "" && sh == ShapeRamp {
		return ShapeSawtooth
	}
	return sh
}

// retired reports whether cells that used a declared resource are observed in
// the last night and none of them uses it any more.
func (l *look) retired(s *scope, role string) bool {
	seen := false
	for _, i := range s.cells {
		u, ok := l.uses[useKey{s.res, role, i}]
		if !ok || u[l.nights-1] {
			return false
		}
		n := len(l.cells[i].obs)
		seen = seen || (n > 0 && l.cells[i].obs[n-1].night == l.nights-1)
	}
	return seen
}
