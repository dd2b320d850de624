package record

import (
	"strings"
)

// crockford is the alphabet of tags: digits and letters without I, L, O and U (Crockford base 32).
const crockford = "0123456789ABCDEFGHJKMNPQRSTVWXYZ"

const alphanumeric = "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ"

// checkCharacter gives the ISO 7064 MOD 37,36 check character of digits and capital letters.
func checkCharacter(s string) byte {
	p := 36
	for i := 0; i < len(s); i++ {
		sum := (p + strings.IndexByte(alphanumeric, s[i])) % 36
		if sum == 0 {
			sum = 36
		}
		p = sum * 2 % 37
	}
	return alphanumeric[(37-p)%36]
}

// DrawTag makes a tag of 30 random bits: six characters and their check character. ok is false where the check
// character would be one of I, L, O, U: draw again.
func DrawTag(bits uint32) (tag string, ok bool) {
	var b [6]byte
	for i := range b {
		b[i] = crockford[bits>>(5*i)&31]
	}
	c := checkCharacter(string(b[:]))
	return string(b[:]) + string(c), strings.IndexByte("ILOU", c) < 0
}

// IsTag reports a tag in its stored form: seven capital characters, the last of them right.
func IsTag(s string) bool {
	if len(s) != 7 {
		return false
	}
	for i := 0; i < 7; i++ {
		if strings.IndexByte(crockford, s[i]) < 0 {
			return false
		}
	}
	return checkCharacter(s[:6]) == s[6]
}

// ParseTag reads a tag as people write and scan it: any letter case, hyphens and spaces ignored, I and L as 1, O as 0.
// It takes a label's address too and never looks at its host. ok is false where the check character does not fit.
func ParseTag(s string) (tag string, ok bool) {
	s = strings.TrimSpace(s)
	if len(s) > 256 {
		return "", false
	}
	if i := strings.Index(strings.ToUpper(s), "/T/"); i >= 0 {
		s = s[i+3:]
		s, _, _ = strings.Cut(s, "?")
		s, _, _ = strings.Cut(s, "#")
		s = strings.TrimSuffix(s, "/")
	}
	var b strings.Builder
	for _, c := range strings.ToUpper(s) {
		switch c {
		case '-', ' ', '\u00a0', '\u2010', '\u2011', '\u2012', '\u2013':
			continue
		case 'I', 'L':
			c = '1'
		case 'O':
			c = '0'
		}
		b.WriteRune(c)
	}
	tag = b.String()
	return tag, IsTag(tag)
}

// ShowTag gives the tag as people read it, K7Q-M2P-3, with hyphens that no line breaks at.
func ShowTag(tag string) string {
	if len(tag) != 7 {
		return tag
	}
	return tag[:3] + "\u2011" + tag[3:6] + "\u2011" + tag[6:]
}

// TagAddress gives the address a label carries: HTTPS://HOST/T/XXXXXXX, in capitals (a QR code then needs fewer
// modules). base is https://host.
func TagAddress(base, tag string) string {
	return strings.ToUpper(strings.TrimSuffix(base, "/")) + "/T/" + tag
}
