package proof

// Difference is where what stands in a file is not what stands in a tree. Places and lines count from 1; 0 is none.
type Difference struct {
	What  string // Changed, Missing, Foreign or Moved
	Place int64  // in the tree
	Line  int64  // in the file
}

// What a Difference can be.
const (
	Changed = "changed" // the line at this place is another
	Missing = "missing" // the leaf of this place stands nowhere in the file
	Foreign = "foreign" // the line is no leaf of the tree
	Moved   = "moved"   // the leaf of this place stands elsewhere in the file
)

// CompareLeaves names what was done to a file whose lines have the leaf hashes got, where the tree has the leaves want: what was
// changed, dropped, added or moved, each once, in the order of the tree. Equal lists give nothing.
func CompareLeaves(want, got []Hash) (list []Difference) {
	if equalHashes(want, got) {
		return nil
	}
	place := make(map[Hash]int, len(want))
	for i, h := range want {
		place[h] = i
	}
	line := make(map[int]int, len(got)) // place → line
	var foreign []int
	order := make([]int, 0, len(got)) // places in the order of the file
	for i, h := range got {
		p, ok := place[h]
		if _, twice := line[p]; !ok || twice {
			foreign = append(foreign, i)
			continue
		}
		line[p] = i
		order = append(order, p)
	}
	inOrder := longestRising(order)
	expected := 0 // line where the next place should stand, counted along what is in order
	for p := range want {
		at, there := line[p]
		switch {
		case there && inOrder[p]:
			for len(foreign) > 0 && foreign[0] < at {
				list, foreign = append(list, Difference{Foreign, 0, int64(foreign[0]) + 1}), foreign[1:]
			}
			expected = at + 1
		case there:
			list = append(list, Difference{Moved, int64(p) + 1, int64(at) + 1})
		case len(foreign) > 0 && foreign[0] == expected:
			list, foreign = append(list, Difference{Changed, int64(p) + 1, int64(expected) + 1}), foreign[1:]
			expected++
		default:
			list = append(list, Difference{Missing, int64(p) + 1, 0})
		}
	}
	for _, f := range foreign {
		list = append(list, Difference{Foreign, 0, int64(f) + 1})
	}
	return list
}

func equalHashes(a, b []Hash) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

// longestRising gives the members of a longest rising subsequence: what was moved is the rest, and as little as can be.
func longestRising(order []int) map[int]bool {
	tails, back := []int{}, make([]int, len(order)) // tails: index into order of the smallest end of each length
	for i, v := range order {
		lo, hi := 0, len(tails)
		for lo < hi {
			if mid := (lo + hi) / 2; order[tails[mid]] < v {
				lo = mid + 1
			} else {
				hi = mid
			}
		}
		back[i] = -1
		if lo > 0 {
			back[i] = tails[lo-1]
		}
		if lo == len(tails) {
			tails = append(tails, i)
		} else {
			tails[lo] = i
		}
	}
	in := make(map[int]bool, len(tails))
	if len(tails) > 0 {
		for i := tails[len(tails)-1]; i >= 0; i = back[i] {
			in[order[i]] = true
		}
	}
	return in
}
