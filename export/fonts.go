package export

import _ "embed"

// The fonts of printed labels: DejaVu 2.37 (licence in fonts/DejaVu-LICENSE.txt). Only the glyphs used go into a file.
var (
	//go:embed fonts/DejaVuSans.ttf
	sansFont []byte
	//go:embed fonts/DejaVuSans-Bold.ttf
	sansBoldFont []byte
	//go:embed fonts/DejaVuSansMono-Bold.ttf
	monoBoldFont []byte
)
