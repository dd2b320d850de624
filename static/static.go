// Package static holds what is sent to browsers as it is: the field client's modules, styles, vendored libraries with
// their licences, and the words catalogue. It imports nothing of ours and does no logic.
package static

import "embed"

// Files is every file of this folder that a browser may fetch. Words is part of it.
//
//go:embed *.css *.mjs *.webmanifest icons words vendor
var Files embed.FS
