package record

import (
	"crypto/sha256"
	"encoding/hex"
	"strings"
	"time"
)

// IsID reports whether s is a UUID of version 7 or 8 (RFC 9562) in lower case.
func IsID(s string) bool {
	_, ok := IDBytes(s)
	return ok
}

// shapedID looks at the length, the version and the variant.
func shapedID(s string) bool {
	return len(s) == 36 && (s[14] == '7' || s[14] == '8') && (s[19] == '8' || s[19] == '9' || s[19] == 'a' || s[19] == 'b')
}

// idBytes reads 36 digits and hyphens.
func idBytes(s string) (b [16]byte, ok bool) {
	if s[8] != '-' || s[13] != '-' || s[18] != '-' || s[23] != '-' {
		return b, false
	}
	bad := byte(0)
	for i, at := range hexAt {
		high, low := hexValue[s[at]], hexValue[s[at+1]]
		b[i], bad = high<<4|low&15, bad|high|low
	}
	return b, bad < 16
}

// hexAt is where the two digits of each byte of an id stand in its text.
var hexAt = [16]uint8{0, 2, 4, 6, 9, 11, 14, 16, 19, 21, 24, 26, 28, 30, 32, 34}

// hexValue gives the value of a lower-case hexadecimal digit, 0xff for anything else.
var hexValue = func() (v [256]byte) {
	for i := range v {
		v[i] = 0xff
	}
	for i, c := range []byte("0123456789abcdef") {
		v[c] = byte(i)
	}
	return v
}()

func isHex(c byte) bool { return hexValue[c] < 16 }

// IDBytes gives the 16 bytes of an id; ok is false where IsID is.
func IDBytes(s string) (b [16]byte, ok bool) {
	if !shapedID(s) {
		return b, false
	}
	return idBytes(s)
}

// IDText gives the text of an id's 16 bytes.
func IDText(b []byte) string {
	var t [36]byte
	hex.Encode(t[0:8], b[0:4])
	hex.Encode(t[9:13], b[4:6])
	hex.Encode(t[14:18], b[6:8])
	hex.Encode(t[19:23], b[8:10])
	hex.Encode(t[24:36], b[10:16])
	t[8], t[13], t[18], t[23] = '-', '-', '-', '-'
	return string(t[:])
}

// IsNamed reports a version 8 id: one made from what it names, by imports and for shipped records.
func IsNamed(id string) bool { return len(id) == 36 && id[14] == '8' }

// NewID makes a version 7 id of a time and ten random bytes.
func NewID(at time.Time, random [10]byte) string {
	var b [16]byte
	ms := uint64(at.UnixMilli())
	for i := 5; i >= 0; i-- {
		b[i] = byte(ms)
		ms >>= 8
	}
	copy(b[6:], random[:])
	b[6] = b[6]&0x0f | 0x70
	b[8] = b[8]&0x3f | 0x80
	return IDText(b[:])
}

// NamedID makes the version 8 id of key parts: the first 16 bytes of SHA-256 over the parts joined by 0x1F.
func NamedID(parts ...string) string {
	sum := sha256.Sum256([]byte(strings.Join(parts, "\x1f")))
	sum[6] = sum[6]&0x0f | 0x80
	sum[8] = sum[8]&0x3f | 0x80
	return IDText(sum[:16])
}
