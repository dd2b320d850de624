// Package store keeps one organisation's book, the read models folded from it and the directory of people, in one bbolt
// file. Book and read models change in the same transaction. No *bbolt.Tx and no byte that points into the file leaves
// the package, and pages never scan the book.
//
// Buckets and keys (integers big-endian; id = the 16 bytes of a UUID; seq = place in the whole book, from 1; ord = number
// of a log, given in book order; pos = place in a log, from 1):
//
//	book: written once, changed by sealing alone
//	  rec    seq 8                      → ord 4 | pos 8 | stamp length 2 | stamp | record, or the stub of a sealed one
//	  id     id 16                      → seq 8
//	  log    ord 4 | pos 8              → seq 8 | hashes stored with this leaf, 32 each, level 0 first
//	  logs   log name                   → ord 4 | size 8 | right edge of the tree, 32 each
//	  names  ord 4                      → log name
//	  quar   seq 8 of record.refused    → length 2 | sentence | the exact bytes refused
//	  quarsha SHA-256 32                → seq 8 of record.refused
//	  heads  epoch 4 | seq 8            → a head that was signed when the book held seq records
//	  former epoch 4 | seq 8            → JSON of FormerHead: signed before a restore, over more than the backup held
//	  differ id 16 | SHA-256 32         → received ms 8 | the exact bytes that came again under a named id with other values
//	  meta   store, org, epoch, demo, format, clock, model, wipe (while something is to be overwritten)
//	counted from the book, computed anew by Rebuild
//	  count  installation 16 | ord 4    → runs of n seen: (from 8, to 8)…
//	  reused installation 16 | ord 4 | n 8 | id 16 → nothing: this record used an n that was taken
//	  taken  tag 7                      → nothing: minted or bound once
//	  grant  person 16 | seq 8          → JSON of accessFact: a role, sites, or an installation that person enrolled
//	read models: see fold.go
//	directory: outside book and trees, really deleted
//	  dir_person  person 16             → JSON
//	  dir_link    SHA-256 of token 32   → JSON
//	  dir_session SHA-256 of token 32   → JSON
//	  dir_secret  person 16             → JSON of secret: password hash, second step
//	  dir_token   SHA-256 of token 32   → JSON
//	  dir_inst    installation 16       → SHA-256 of its token 32
//	  dir_feed    SHA-256 of token 32   → JSON: whose calendar
//	  dir_digest  person 16             → JSON: which digest, and what became of the last
//	  dir_setting name                  → value
//	  dir_columns what is read | 0 | name in lower case → JSON of KeptColumns
//
// Two readers are shared by pages, exports and plans, which never work out anew what they say: View.ProtectionGaps (what of a
// site's ground-fault protection somebody should look at, worst first) and View.Defects (what failed and is not put right).
//
// The keys of rec, log and quar arrive in order and their pages are filled to 95 %.
package store

import (
	"encoding/binary"

	"tripwell/store/record"
)

var (
	bktRec     = []byte("rec")
	bktID      = []byte("id")
	bktLog     = []byte("log")
	bktLogs    = []byte("logs")
	bktNames   = []byte("names")
	bktQuar    = []byte("quar")
	bktQuarSHA = []byte("quarsha")
	bktDiffer  = []byte("differ")
	bktMeta    = []byte("meta")
	bktHeads   = []byte("heads")
	bktFormer  = []byte("former")

	bktCount  = []byte("count")
	bktReused = []byte("reused")
	bktGrant  = []byte("grant")
	bktTaken  = []byte("taken")

	bktPerson   = []byte("dir_person")
	bktLink     = []byte("dir_link")
	bktSession  = []byte("dir_session")
	bktSecret   = []byte("dir_secret")
	bktToken    = []byte("dir_token")
	bktInst     = []byte("dir_inst")
	bktCalendar = []byte("dir_feed")
	bktDigest   = []byte("dir_digest")
	bktSetting  = []byte("dir_setting")
	bktColumns  = []byte("dir_columns")
)

var bookBuckets = [][]byte{bktRec, bktID, bktLog, bktLogs, bktNames, bktQuar, bktQuarSHA, bktHeads, bktFormer, bktDiffer, bktMeta}
var countBuckets = [][]byte{bktCount, bktReused, bktGrant, bktTaken}
var directoryBuckets = [][]byte{bktPerson, bktLink, bktSession, bktSecret, bktToken, bktInst, bktCalendar, bktDigest, bktSetting, bktColumns}

// Names in meta and dir_setting.
var (
	metaStore  = []byte("store")
	metaOrg    = []byte("org")
	metaEpoch  = []byte("epoch")
	metaDemo   = []byte("demo")
	metaFormat = []byte("format")
	metaClock  = []byte("clock")
	metaModel  = []byte("model")
	settingURL = []byte("url")

	settingBackup  = []byte("backed_up")
	settingMail    = []byte("mail")
	settingWitness = []byte("witnessed")
)

// formatVersion of the file; a newer one is refused.
const formatVersion = 1

func key32(n uint32) []byte { return binary.BigEndian.AppendUint32(nil, n) }
func key64(n uint64) []byte { return binary.BigEndian.AppendUint64(nil, n) }

func readKey64(b []byte) uint64 {
	if len(b) < 8 {
		return 0
	}
	return binary.BigEndian.Uint64(b)
}

// idKey gives the 16 bytes of an id that a record carries, and nil for anything else.
func idKey(id string) []byte {
	b, ok := record.IDBytes(id)
	if !ok {
		return nil
	}
	return b[:]
}

func logKey(ord uint32, pos int64) []byte {
	return binary.BigEndian.AppendUint64(binary.BigEndian.AppendUint32(make([]byte, 0, 12), ord), uint64(pos))
}

func countKey(installation string, ord uint32) []byte {
	return binary.BigEndian.AppendUint32(append(make([]byte, 0, 20), idKey(installation)...), ord)
}

// reusedKey without an id is what the keys of one number begin with.
func reusedKey(installation string, ord uint32, n int64, id string) []byte {
	return append(binary.BigEndian.AppendUint64(countKey(installation, ord), uint64(n)), idKey(id)...)
}
