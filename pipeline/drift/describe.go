package drift

func (l *look) describe(r *ranked, found []*ranked) Explanation { return Explanation{} }
func (l *look) standing(ev *Evaluation)                         {}
