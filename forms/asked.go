package forms

// Asked lists the questions the form puts for an entry as it stands, in the order of the form: those whose conditions
// hold, without what is in a closed step or comes after an answer that ends the form. set may be nil; it only gives
// what is assumed of a device.
func (f *Form) Asked(set *LimitSet, e Entry) []Ask {
	now := factsOf(f, set, &e)
	var out []Ask
	ended := false
	f.asks(func(a ask) bool {
		if !now.all(a.When) || now.closed(a.step) {
			return true
		}
		out = append(out, *a.Ask)
		answer, _ := now.answer(a.Reading).(string)
		for _, end := range a.Ends {
			ended = ended || answer == end
		}
		return !ended
	})
	return out
}
