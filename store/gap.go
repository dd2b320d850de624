package store

import (
	"cmp"
	"encoding/json"
	"slices"
	"strconv"

	"tripwell/store/record"
)

// numbers are counts of one installation in one log, both ends included; the zero value is none.
type numbers struct{ from, to int64 }

func (n numbers) String() string {
	if n.from == n.to {
		return strconv.FormatInt(n.from, 10)
	}
	return strconv.FormatInt(n.from, 10) + "–" + strconv.FormatInt(n.to, 10)
}

// gapBefore gives the numbers missing right before one, none where the one before it came. Numbers of records that were
// refused are not missing: they came, and are listed as refused.
func (v *View) gapBefore(installation string, ord uint32, n int64) (numbers, error) {
	if n <= 1 {
		return numbers{}, nil
	}
	if v.counted == nil {
		v.counted = map[string]*runs{}
	}
	key := string(countKey(installation, ord))
	r := v.counted[key]
	if r == nil {
		r = readRuns(v.tx.Bucket(bktCount).Get([]byte(key)))
		v.counted[key] = r
	}
	gap := r.gapBefore(n)
	if gap == (numbers{}) {
		return gap, nil
	}
	return v.missing(installation, string(v.tx.Bucket(bktNames).Get(key32(ord))), gap)
}

func (r *runs) gapBefore(n int64) numbers {
	after := int64(0)
	for i := 0; i+1 < len(r.pairs); i += 2 {
		if r.pairs[i] == n && after+1 < n {
			return numbers{after + 1, n - 1}
		}
		after = r.pairs[i+1]
	}
	return numbers{}
}

// missing takes the numbers of refused records off both ends of a gap.
func (v *View) missing(installation, log string, gap numbers) (numbers, error) {
	if v.refused == nil {
		refused, err := v.refusedNumbers()
		if err != nil {
			return numbers{}, err
		}
		v.refused = refused
	}
	for gap.from <= gap.to && v.refused[numbered{installation, log, gap.from}] {
		gap.from++
	}
	for gap.from <= gap.to && v.refused[numbered{installation, log, gap.to}] {
		gap.to--
	}
	if gap.from > gap.to {
		return numbers{}, nil
	}
	return gap, nil
}

// numbered names a record by who counted it.
type numbered struct {
	installation, log string
	n                 int64
}

// refusedNumbers gives the numbers of refused records whose refusal stands in the log they name: only there had the
// sender the right to write, so only there is the number its own.
func (v *View) refusedNumbers() (map[numbered]bool, error) {
	out := map[numbered]bool{}
	recs := v.tx.Bucket(bktRec)
	err := v.tx.Bucket(bktQuar).ForEach(func(seq, kept []byte) error {
		ref, err := readRefusal(recs.Get(seq), kept)
		if err != nil {
			return err
		}
		if r, _ := record.Parse(ref.Bytes); r != nil && r.Log == ref.Log {
			out[numbered{ref.From, ref.Log, ref.N}] = true
		}
		return nil
	})
	return out, err
}

// Gap is a run of numbers of one installation that never came: the device may still hold those records, or they are
// lost.
type Gap struct {
	Installation string
	Person       string // whoever signed in on it last; "" where nobody here did
	Log          string // a site, org or office
	From, To     int64  // both included
}

// Gaps lists the numbers that are missing in the logs of the scope, by log and installation.
func (v *View) Gaps() ([]Gap, error) {
	var out []Gap
	c := v.tx.Bucket(bktCount).Cursor()
	for k, row := c.First(); len(k) == 20; k, row = c.Next() {
		log := string(v.tx.Bucket(bktNames).Get(k[16:]))
		if !v.scope.mayRead(log) {
			continue
		}
		r, installation := readRuns(row), id16(k[:16]).String()
		for i := 0; i < len(r.pairs); i += 2 {
			gap := r.gapBefore(r.pairs[i])
			if gap == (numbers{}) {
				continue
			}
			gap, err := v.missing(installation, log, gap)
			if err != nil {
				return nil, err
			}
			if gap != (numbers{}) {
				out = append(out, Gap{installation, v.Holder(installation), log, gap.from, gap.to})
			}
		}
	}
	slices.SortFunc(out, func(a, b Gap) int {
		return cmp.Or(cmp.Compare(a.Log, b.Log), cmp.Compare(a.Installation, b.Installation), cmp.Compare(a.From, b.From))
	})
	return out, nil
}

// Holder gives the person whose token an installation has, "" where nobody's is known here.
func (v *View) Holder(installation string) string {
	key := v.tx.Bucket(bktInst).Get(idKey(installation))
	if key == nil {
		return ""
	}
	var b bearer
	if json.Unmarshal(v.tx.Bucket(bktToken).Get(key), &b) != nil {
		return ""
	}
	return b.Person
}
