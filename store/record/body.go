package record

import "strings"

// checkBody holds the members a kind names against the body.
func (k kind) checkBody(body []byte) *Fault {
	var seen uint
	f := members(body, func(name string, v []byte) *Fault {
		for i, m := range k.body {
			if m.name != name {
				continue
			}
			if v[0] == 'n' && !m.must {
				return nil
			}
			seen |= 1 << i
			return checkShape(m.shape, name, v, m.must)
		}
		return nil
	})
	if f != nil {
		return f
	}
	for i, m := range k.body {
		if m.must && seen&(1<<i) == 0 {
			return fault("bad_body", m.name, "The body has no %q.", m.name)
		}
	}
	return nil
}

var shapeWords = map[string]string{
	"text": "a text", "bool": "true or false", "number": "a number", "object": "an object", "list": "a list",
	"day": "a date such as 2026-12-31", "id": "a UUID of version 7 or 8 in lower case", "ids": "a list of UUIDs",
	"stamp": "16 lower-case hexadecimal digits", "hash": "64 lower-case hexadecimal digits",
	"tag": "a tag of seven characters such as K7QM2P3, with its check character", "tags": "a list of tags",
	"form": "a device kind and a task such as gfci-receptacle/button", "role": "manager, crew or auditor",
}

func checkShape(shape, name string, v []byte, must bool) *Fault {
	ok := true
	switch shape {
	case "set":
		return checkSet(name, v, false)
	case "wide":
		return checkSet(name, v, true)
	case "readings":
		return checkReadings(name, v)
	case "series":
		return checkSeries(name, v)
	case "text":
		ok = v[0] == '"' && (!must || len(v) > 2)
	case "bool":
		ok = v[0] == 't' || v[0] == 'f'
	case "number":
		ok = isNumber(v)
	case "object":
		ok = v[0] == '{'
	case "list":
		ok = v[0] == '['
	case "day":
		ok = v[0] == '"' && (isDay(text(v)) || !must && len(v) == 2)
	case "id":
		ok = IsID(text(v))
	case "stamp":
		_, ok = ParseClock(text(v))
	case "hash":
		ok = isHash(text(v))
	case "tag":
		ok = IsTag(text(v))
	case "form":
		ok = isFormID(text(v))
	case "role":
		s := text(v)
		ok = s == "manager" || s == "crew" || s == "auditor"
	case "ids":
		ok = listOf(v, IsID)
	case "tags":
		ok = listOf(v, IsTag)
	}
	if !ok {
		return fault("bad_body", name, "The body's %q must be %s.", name, shapeWords[shape])
	}
	return nil
}

func listOf(v []byte, is func(string) bool) bool {
	return v[0] == '[' && elements(v, func(e []byte) *Fault {
		if !is(text(e)) {
			return &Fault{}
		}
		return nil
	}) == nil
}

// checkSet holds a map of field → text, number, true/false, null or list of texts; wide lets fields be objects too.
func checkSet(name string, v []byte, wide bool) *Fault {
	if v[0] != '{' {
		return fault("bad_body", name, "The body's %q must be an object of fields.", name)
	}
	empty := true
	f := members(v, func(field string, value []byte) *Fault {
		empty = false
		if !isFieldName(field) {
			return fault("bad_body", name+"."+short([]byte(field)), "%q is no name of a field: fields are lower-case letters, digits and _, starting with a letter.", short([]byte(field)))
		}
		ok := value[0] != '{' || wide
		if value[0] == '[' {
			ok = listOf(value, func(string) bool { return true }) && elements(value, textOnly) == nil
		}
		if !ok {
			return fault("bad_body", name+"."+field, "The field %q must be a text, a number, true or false, null, or a list of texts.", field)
		}
		return nil
	})
	if f == nil && empty {
		return fault("bad_body", name, "The body's %q sets no field.", name)
	}
	return f
}

func textOnly(v []byte) *Fault {
	if v[0] != '"' {
		return &Fault{}
	}
	return nil
}

// checkReadings holds a map of reading code → reading.
func checkReadings(name string, v []byte) *Fault {
	if v[0] != '{' {
		return fault("bad_body", name, "The body's %q must be an object of readings.", name)
	}
	return members(v, func(code string, value []byte) *Fault {
		return checkReading(name, code, value)
	})
}

// checkSeries holds a list of {"at": conditions, code: reading, …}.
func checkSeries(name string, v []byte) *Fault {
	if v[0] != '[' {
		return fault("bad_body", name, "The body's %q must be a list.", name)
	}
	return elements(v, func(e []byte) *Fault {
		if e[0] != '{' {
			return fault("bad_body", name, "Each of %q must be an object with its conditions and readings.", name)
		}
		return members(e, func(code string, value []byte) *Fault {
			if code != "at" {
				return checkReading(name, code, value)
			}
			if value[0] != '{' {
				return fault("bad_body", name+".at", "The conditions of %q must be an object.", name)
			}
			return members(value, func(_ string, condition []byte) *Fault {
				if !isScalar(condition) {
					return fault("bad_body", name+".at", "The conditions of %q must be numbers, texts, true or false.", name)
				}
				return nil
			})
		})
	})
}

func checkReading(name, code string, v []byte) *Fault {
	if !isFieldName(code) {
		return fault("bad_body", name+"."+short([]byte(code)), "%q is no reading: codes are lower-case letters, digits and _, starting with a letter.", short([]byte(code)))
	}
	bad := func(what string) *Fault {
		return fault("bad_body", name+"."+code, "The reading %q %s.", code, what)
	}
	switch v[0] {
	case '{':
	case '[', 'n':
		return bad("must be a value, a bound or a reason why it is missing")
	default:
		return nil
	}
	says := 0
	f := members(v, func(m string, value []byte) *Fault {
		says++
		switch m {
		case "value":
			if !isScalar(value) {
				return bad("has a value that is neither a number, a text, nor true or false")
			}
		case "above", "below":
			if !isNumber(value) {
				return bad("has a bound that is no number")
			}
		case "no_trip":
			if value[0] != 't' {
				return bad("has a no_trip that is not true")
			}
		case "missing":
			if value[0] != '"' || len(value) == 2 {
				return bad("is missing without a reason")
			}
		case "typed", "unit":
			says--
			if value[0] != '"' {
				return bad("has a " + m + " that is no text")
			}
		default:
			return bad("has a member that is none of typed, unit, value, above, below, no_trip and missing")
		}
		return nil
	})
	if f == nil && says != 1 {
		return bad("must say exactly one thing: a value, a bound, or why it is missing")
	}
	return f
}

func isScalar(v []byte) bool { return v[0] != '{' && v[0] != '[' && v[0] != 'n' }

// checkMeaning holds the rules of single kinds that a table of members does not say.
func (r *Record) checkMeaning() *Fault {
	switch r.Kind {
	case "site.registered":
		set := fields(r.Body)
		if !isSiteCode(text(orNull(set["code"]))) {
			return fault("bad_body", "set.code", "A site needs a code of 2 to 12 letters, digits and hyphens, such as ELM-4.")
		}
		if len(text(orNull(set["name"]))) == 0 {
			return fault("bad_body", "set.name", "A site needs a name.")
		}
		if s, ok := set["standard"]; ok && text(s) != "NEC" && text(s) != "IEC" {
			return fault("bad_body", "set.standard", "A site's standard is NEC or IEC.")
		}
	case "device.registered":
		if len(text(orNull(fields(r.Body)["kind"]))) == 0 {
			return fault("bad_body", "set.kind", "A device needs a kind.")
		}
	case "round.made", "round.set":
		stops, said := fields(r.Body)["stops"]
		some := false
		ok := said && listOf(stops, func(s string) bool { some = true; return IsStop(s) })
		if r.Kind == "round.made" && !(ok && some) || said && !ok {
			return fault("bad_body", "set.stops", "A round needs its stops: a list of a device and a test each, such as ID/button.")
		}
	case "entry.imported":
		body := bodyOf(r.Body)
		if orNull(body["readings"])[0] != '{' && (len(text(orNull(body["day"]))) == 0 || len(text(orNull(body["result"]))) == 0) {
			return fault("bad_body", "readings", "An imported entry needs its readings, or a day and a result.")
		}
	case "entry.corrected", "entry.withdrawn":
		if text(orNull(bodyOf(r.Body)["entry"])) != r.Subject {
			return fault("bad_body", "entry", "The body's entry and the record's subject must be the same id.")
		}
	}
	return nil
}

func orNull(v []byte) []byte {
	if v == nil {
		return []byte("null")
	}
	return v
}

func bodyOf(obj []byte) map[string][]byte {
	m := map[string][]byte{}
	_ = members(obj, func(name string, v []byte) *Fault {
		m[name] = v
		return nil
	})
	return m
}

func fields(body []byte) map[string][]byte { return bodyOf(bodyOf(body)["set"]) }

func isFieldName(s string) bool {
	if len(s) == 0 || len(s) > 64 || s[0] < 'a' || s[0] > 'z' {
		return false
	}
	for i := 1; i < len(s); i++ {
		if c := s[i]; (c < 'a' || c > 'z') && (c < '0' || c > '9') && c != '_' {
			return false
		}
	}
	return true
}

// IsStop reports whether s names a stop of a round: a device's id, a slash and a task.
func IsStop(s string) bool { return len(s) > 37 && IsID(s[:36]) && s[36] == '/' && isWord(s[37:]) }

func isSiteCode(s string) bool {
	if len(s) < 2 || len(s) > 12 {
		return false
	}
	for i := 0; i < len(s); i++ {
		if c := s[i]; (c < 'a' || c > 'z') && (c < 'A' || c > 'Z') && (c < '0' || c > '9') && c != '-' {
			return false
		}
	}
	return true
}

func isFormID(s string) bool {
	kind, task, ok := strings.Cut(s, "/")
	return ok && isWord(kind) && isWord(task)
}

// isWord holds lower-case letters, digits and hyphens.
func isWord(s string) bool {
	for i := 0; i < len(s); i++ {
		if c := s[i]; (c < 'a' || c > 'z') && (c < '0' || c > '9') && c != '-' {
			return false
		}
	}
	return len(s) > 0
}

func isHash(s string) bool {
	for i := 0; i < len(s); i++ {
		if !isHex(s[i]) {
			return false
		}
	}
	return len(s) == 64
}

func isDay(s string) bool {
	if len(s) != 10 {
		return false
	}
	_, ok := ParseTime(s + "T00:00:00Z")
	return ok
}
