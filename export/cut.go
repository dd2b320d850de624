package export

// cut keeps a quoted value short.
func cut(s string) string {
	if r := []rune(Printable(s)); len(r) > 60 {
		return string(r[:60]) + "…"
	}
	return Printable(s)
}
