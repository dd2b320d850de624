package server

import (
	"fmt"
	"unicode/utf16"
	"unicode/utf8"

	"github.com/go-json-experiment/json/jsontext"
	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// pushRequest is a batch. Sent is the sender's own clock at sending.
type pushRequest struct {
	Protocol int          `json:"protocol"`
	Sent     string       `json:"sent"`
	Records  []pushRecord `json:"records"`
}

type pushRecord struct {
	Record exactText    `json:"record"`
	Held   []store.Held `json:"held"`
}

// exchangePush takes records from a phone: one receipt for each, in order. What is wrong with one record refuses only
// that record; an error answers the whole batch and means that nothing was decided.
func (s *Server) exchangePush(c echo.Context) error {
	var req pushRequest
	// Bytes that are no UTF-8 are the fault of one record; the store refuses that one and keeps it whole.
	if err := decodeJSON(c, &req, jsontext.AllowInvalidUTF8(true)); err != nil {
		return err
	}
	if req.Protocol != protocol {
		return refuse(codeInvalid, "protocol", fmt.Sprintf("Protocol %d is not spoken here, %d is. Update the program; what is unsent stays where it is.", req.Protocol, protocol))
	}
	if len(req.Records) > pushRecords {
		return refuse(codeTooLarge, "records", fmt.Sprintf("These are %d records; %d are taken at once. Send half of them.", len(req.Records), pushRecords))
	}
	sent, err := instant("sent", req.Sent)
	if err != nil {
		return err
	}
	batch := make([]store.Incoming, len(req.Records))
	for i, r := range req.Records {
		if r.Record == nil {
			return refuse(codeInvalid, fmt.Sprintf("records.%d.record", i), "The record is missing. Send its exact bytes as a JSON string.")
		}
		batch[i] = store.Incoming{Record: r.Record, Held: r.Held}
	}
	receipts := []store.Receipt{}
	if len(batch) > 0 {
		who := c.Get(callerKey).(*caller)
		if receipts, err = s.store.Push(c.Request().Context(), store.Sender{Installation: who.installation, Sent: sent}, batch); err != nil {
			return err
		}
	}
	return s.sendJSON(c, 200, receiptsAnswer{Receipts: receipts, Now: s.now()})
}

// exactText is a JSON string's content, byte for byte: what is no UTF-8 stays as it came instead of becoming U+FFFD, so
// that a damaged record is refused and kept as it is, not silently mended.
type exactText []byte

func (t *exactText) UnmarshalJSON(raw []byte) error {
	if len(raw) < 2 || raw[0] != '"' {
		return refuse(codeInvalid, "record", "A record travels as a JSON string that holds its exact bytes. Send it as a string.")
	}
	out := make([]byte, 0, len(raw)-2)
	in := raw[1 : len(raw)-1]
	for i, n := 0, 0; i < len(in); i += n {
		if in[i] != '\\' { // a record is full of quotes: nothing is gained by looking ahead
			out, n = append(out, in[i]), 1
			continue
		}
		out, n = unescape(out, in[i:])
	}
	*t = out
	return nil
}

// unescape appends what the escape at the start of in stands for and tells its length. The decoder has already checked
// the form of every escape.
func unescape(out, in []byte) ([]byte, int) {
	switch in[1] {
	case 'b':
		return append(out, '\b'), 2
	case 'f':
		return append(out, '\f'), 2
	case 'n':
		return append(out, '\n'), 2
	case 'r':
		return append(out, '\r'), 2
	case 't':
		return append(out, '\t'), 2
	case 'u':
		r := hex4(in[2:])
		if !utf16.IsSurrogate(r) {
			return utf8.AppendRune(out, r), 6
		}
		if len(in) >= 12 && in[6] == '\\' && in[7] == 'u' {
			if pair := utf16.DecodeRune(r, hex4(in[8:])); pair != utf8.RuneError {
				return utf8.AppendRune(out, pair), 12
			}
		}
		// Half a pair is no character; written as its three bytes it is not UTF-8, so the store sees the fault.
		return append(out, 0xE0|byte(r>>12), 0x80|byte(r>>6)&0xBF, 0x80|byte(r)&0xBF), 6
	}
	return append(out, in[1]), 2
}

func hex4(in []byte) (r rune) {
	for _, b := range in[:4] {
		switch {
		case b >= 'a':
			b -= 'a' - 10
		case b >= 'A':
			b -= 'A' - 10
		default:
			b -= '0'
		}
		r = r<<4 | rune(b)
	}
	return r
}
