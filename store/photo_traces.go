package store

import (
	"bytes"
	"encoding/binary"
	"slices"
)

// A photo is kept as its phone hashed it, so what a camera's file tells beside the picture (where it was taken and when, with
// which camera, a comment, a smaller picture of what was cut off) cannot be taken out here. The phone draws every photo anew;
// whatever comes another way and still carries such a thing is refused. What a phone's own encoder writes is let through:
// sizes, colours, which way is up.

var errTraces = &Error{Code: "invalid", Field: "photo", Text: "This photo carries more than the picture: where or when it was taken, by which camera, a comment or a second picture. Take it again on the page of the test, which draws it anew without any of that."}

// tellsMore reports whether a picture carries more than itself. What cannot be followed counts as more.
func tellsMore(raw []byte) bool {
	if bytes.HasPrefix(raw, []byte("\x89PNG\r\n\x1a\n")) {
		return pngTellsMore(raw[8:])
	}
	return jpegTellsMore(raw)
}

// pngChunks are those of a picture alone (ISO/IEC 15948, 11): no text, no time, no Exif.
var pngChunks = []string{"IHDR", "PLTE", "IDAT", "IEND", "tRNS", "gAMA", "cHRM", "sRGB", "iCCP", "sBIT", "bKGD", "pHYs", "cICP"}

func pngTellsMore(b []byte) bool {
	for len(b) >= 12 {
		n := int(binary.BigEndian.Uint32(b))
		if name := string(b[4:8]); n < 0 || n > len(b)-12 || !slices.Contains(pngChunks, name) {
			return true
		} else if name == "IEND" {
			return len(b) != 12 // something follows the picture
		}
		b = b[12+n:]
	}
	return true
}

// jpegTellsMore walks the segments (ITU-T T.81, B.1.1) up to the end of the picture.
func jpegTellsMore(b []byte) bool {
	if !bytes.HasPrefix(b, []byte{0xff, 0xd8}) {
		return true
	}
	for b = b[2:]; len(b) >= 4 && b[0] == 0xff; {
		marker := b[1]
		switch {
		case marker == 0xff: // fill
			b = b[1:]
			continue
		case marker == 0xd9: // end
			return len(b) != 2
		}
		n := int(binary.BigEndian.Uint16(b[2:]))
		if n < 2 || n+2 > len(b) {
			return true
		}
		if segmentTellsMore(marker, b[4:2+n]) {
			return true
		}
		if b = b[2+n:]; marker == 0xda {
			b = pastScan(b)
		}
	}
	return !bytes.Equal(b, []byte{0xff, 0xd9})
}

// pastScan gives what follows the coded data of a scan: its next marker that is neither a stuffed byte nor a restart.
func pastScan(b []byte) []byte {
	for i := 0; i+1 < len(b); i++ {
		if b[i] == 0xff && b[i+1] != 0 && b[i+1] != 0xff && (b[i+1] < 0xd0 || b[i+1] > 0xd7) {
			return b[i:]
		}
	}
	return nil
}

func segmentTellsMore(marker byte, body []byte) bool {
	switch {
	case marker == 0xfe: // comment
		return true
	case marker < 0xe0 || marker > 0xef:
		return false // tables and frames of the picture
	case marker == 0xe0 && bytes.HasPrefix(body, []byte("JFIF\x00")):
		return len(body) < 14 || len(body) > 14 // a thumbnail follows
	case marker == 0xe1 && bytes.HasPrefix(body, []byte("Exif\x00\x00")):
		return exifTellsMore(body[6:])
	case marker == 0xe2 && bytes.HasPrefix(body, []byte("ICC_PROFILE\x00")):
		return false
	case marker == 0xed && bytes.HasPrefix(body, []byte("Photoshop 3.0\x00")):
		return resourcesTellMore(body[14:])
	case marker == 0xee && bytes.HasPrefix(body, []byte("Adobe")):
		return false
	}
	return true // XMP, further pictures, a maker's own
}

// exifTags are what encoders write of the picture itself (Exif 2.32, tables 4 and 7): which way is up, resolution, sizes, colours.
var exifTags = []uint16{0x0100, 0x0101, 0x0103, 0x0106, 0x0112, 0x011a, 0x011b, 0x0128, 0x0213, 0x8769, 0x9000, 0x9101, 0xa000, 0xa001, 0xa002, 0xa003, 0xa406}

func exifTellsMore(tiff []byte) bool {
	if len(tiff) < 8 {
		return true
	}
	var order binary.ByteOrder = binary.BigEndian
	if bytes.HasPrefix(tiff, []byte("II")) {
		order = binary.LittleEndian
	}
	dirs := []uint32{order.Uint32(tiff[4:])}
	for looked := 0; len(dirs) > 0; looked++ {
		dir := int64(dirs[0])
		if dirs = dirs[1:]; looked > 1 || dir < 8 || dir+2 > int64(len(tiff)) {
			return true
		}
		n := int64(order.Uint16(tiff[dir:]))
		if dir+2+12*n > int64(len(tiff)) {
			return true
		}
		for i := range n {
			entry := tiff[dir+2+12*i:]
			tag := order.Uint16(entry)
			if !slices.Contains(exifTags, tag) {
				return true
			}
			if tag == 0x8769 {
				dirs = append(dirs, order.Uint32(entry[8:]))
			}
		}
		if end := dir + 2 + 12*n; end+4 <= int64(len(tiff)) && order.Uint32(tiff[end:]) != 0 {
			return true // a second directory holds a smaller picture
		}
	}
	return false
}

// resourcesTellMore lets through what encoders write without being asked: an empty block of captions and its hash.
func resourcesTellMore(b []byte) bool {
	for len(b) >= 12 && bytes.HasPrefix(b, []byte("8BIM")) {
		id, name := binary.BigEndian.Uint16(b[4:]), (int(b[6])+2)&^1
		if len(b) < 10+name {
			return true
		}
		n := int(binary.BigEndian.Uint32(b[6+name:]))
		if empty := id == 0x0404 && n == 0; !empty && !(id == 0x0425 && n == 16) {
			return true
		}
		b = b[10+name:]
		if n = (n + 1) &^ 1; n > len(b) {
			return true
		}
		b = b[n:]
	}
	return len(b) > 0
}
