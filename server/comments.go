package server

import "bytes"

// withoutComments empties the lines of a script or style sheet that are nothing but comment: a phone reads none of them, and
// they were a fifth of what it fetched. The line breaks stay, so that every fault a browser reports names the line of the
// source. Comments behind code stay too: to find those, strings and expressions would have to be told apart.
func withoutComments(raw []byte) []byte {
	lines := bytes.SplitAfter(raw, []byte("\n"))
	out := make([]byte, 0, len(raw))
	for len(lines) > 0 {
		n := commentLines(lines)
		for range n {
			out = append(out, '\n')
		}
		if n == 0 {
			out = append(out, lines[0]...)
			n = 1
		}
		lines = lines[n:]
	}
	return out
}

// commentLines counts the lines from the first on that hold one comment and nothing else.
func commentLines(lines [][]byte) int {
	first := bytes.TrimSpace(lines[0])
	if bytes.HasPrefix(first, []byte("//")) {
		return 1
	}
	if !bytes.HasPrefix(first, []byte("/*")) {
		return 0
	}
	for i, line := range lines {
		end := bytes.Index(line, []byte("*/"))
		if end < 0 {
			continue
		}
		if len(bytes.TrimSpace(line[end+2:])) > 0 {
			return 0
		}
		return i + 1
	}
	return 0
}
