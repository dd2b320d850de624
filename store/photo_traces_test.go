package store

import (
	"bytes"
	"encoding/binary"
	"image"
	"image/jpeg"
	"image/png"
	"strings"
	"testing"
)

// exif makes an Exif segment with one directory of short values (Exif 2.32, 4.6.2).
func exif(order interface {
	binary.ByteOrder
	binary.AppendByteOrder
}, tags ...uint16) string {
	mark := "MM"
	if order.Uint16([]byte{1, 0}) == 1 {
		mark = "II"
	}
	b := order.AppendUint16([]byte(mark), 42)
	b = order.AppendUint16(order.AppendUint32(b, 8), uint16(len(tags)))
	for _, tag := range tags {
		b = order.AppendUint16(order.AppendUint16(b, tag), 3)
		b = order.AppendUint32(order.AppendUint32(b, 1), 1)
	}
	return segment(0xe1, "Exif\x00\x00"+string(order.AppendUint32(b, 0)))
}

func segment(marker byte, body string) string {
	return string(binary.BigEndian.AppendUint16([]byte{0xff, marker}, uint16(len(body)+2))) + body
}

func pngChunk(name, body string) string {
	return string(binary.BigEndian.AppendUint32(nil, uint32(len(body)))) + name + body + "\x00\x00\x00\x00"
}

func TestPhoto_CarriesThePictureAlone(t *testing.T) {
	var j, p bytes.Buffer
	img := image.NewGray(image.Rect(0, 0, 40, 30))
	for i := range img.Pix {
		img.Pix[i] = byte(i * 37)
	}
	if err := jpeg.Encode(&j, img, nil); err != nil {
		t.Fatal(err)
	}
	if err := png.Encode(&p, img); err != nil {
		t.Fatal(err)
	}
	in := func(more string) string { return j.String()[:2] + more + j.String()[2:] }
	pin := func(more string) string { return p.String()[:33] + more + p.String()[33:] } // after IHDR
	jfif := "JFIF\x00\x01\x01\x00\x00\x01\x00\x01"
	for name, c := range map[string]struct {
		raw  string
		more bool
	}{
		"a JPEG":                              {j.String(), false},
		"a PNG":                               {p.String(), false},
		"JFIF":                                {in(segment(0xe0, jfif+"\x00\x00")), false},
		"which way is up":                     {in(exif(binary.BigEndian, 0x0112)), false},
		"sizes and colours":                   {in(exif(binary.LittleEndian, 0x0112, 0xa001, 0xa002, 0xa003)), false},
		"a colour profile":                    {in(segment(0xe2, "ICC_PROFILE\x00\x01\x01profile")), false},
		"an empty caption":                    {in(segment(0xed, "Photoshop 3.0\x008BIM\x04\x04\x00\x00\x00\x00\x00\x00")), false},
		"a position":                          {in(exif(binary.BigEndian, 0x0112, 0x8825)), true},
		"the camera's name":                   {in(exif(binary.LittleEndian, 0x010f)), true},
		"the moment":                          {in(exif(binary.BigEndian, 0x9003)), true},
		"XMP":                                 {in(segment(0xe1, "http://ns.adobe.com/xap/1.0/\x00<x:xmpmeta/>")), true},
		"a comment":                           {in(segment(0xfe, "by the sink")), true},
		"a caption":                           {in(segment(0xed, "Photoshop 3.0\x008BIM\x04\x04\x00\x00\x00\x00\x00\x02ab")), true},
		"a thumbnail":                         {in(segment(0xe0, jfif+"\x01\x01\x00\x00\x00")), true},
		"further pictures":                    {in(segment(0xe2, "MPF\x00II*\x00")), true},
		"a film behind it":                    {j.String() + "ftypmp42", true},
		"an Exif that points past its end":    {in(segment(0xe1, "Exif\x00\x00II*\x00\xff\xff\xff\x7f")), true},
		"text in a PNG":                       {pin(pngChunk("tEXt", "Comment\x00by the sink")), true},
		"Exif in a PNG":                       {pin(pngChunk("eXIf", "II*\x00")), true},
		"something behind a PNG":              {p.String() + "PK", true},
		"a JPEG cut off within its picture":   {j.String()[:j.Len()-20], true},
		"a segment said to be longer than is": {j.String()[:2] + "\xff\xe1\xff\xff", true},
	} {
		if got := tellsMore([]byte(c.raw)); got != c.more {
			t.Errorf("%s: tells more %v, want %v", name, got, c.more)
		}
	}
	if err := checkPhoto([]byte(in(exif(binary.BigEndian, 0x8825)))); err == nil || !strings.Contains(err.Error(), "where or when") {
		t.Errorf("a photo with its position: %v", err)
	}
}

func FuzzPhotoTraces(f *testing.F) {
	var j, p bytes.Buffer
	_ = jpeg.Encode(&j, image.NewGray(image.Rect(0, 0, 9, 9)), nil)
	_ = png.Encode(&p, image.NewGray(image.Rect(0, 0, 9, 9)))
	f.Add(j.Bytes())
	f.Add(p.Bytes())
	f.Add([]byte(j.String()[:2] + exif(binary.LittleEndian, 0x8769, 0x8825) + j.String()[2:]))
	f.Fuzz(func(t *testing.T, raw []byte) { tellsMore(raw) })
}
