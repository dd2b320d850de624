package server

import (
	"bytes"
	"encoding/binary"
	"errors"
	"image"
	"image/jpeg"
	"io"
	"net/url"

	"github.com/labstack/echo/v4"
)

// fileField is the one file a form may carry.
const fileField = "file"

// attachLimit bounds a form with a file.
const attachLimit = 12 << 20

// typedUpload is typedForm of a form that may carry one file; raw is nil where none was chosen.
func (s *Server) typedUpload(c echo.Context) (f *typedForm, raw []byte, err error) {
	f = &typedForm{Values: url.Values{}, ink: s.ink(), wrong: map[string]string{}}
	parts, err := c.Request().MultipartReader()
	if err != nil {
		f, err = s.typedForm(c) // sent without a file, as a program would
		return f, nil, err
	}
	for {
		part, err := parts.NextPart()
		if errors.Is(err, io.EOF) {
			return f, raw, nil
		}
		if err != nil {
			return f, nil, formError(err)
		}
		b, err := io.ReadAll(part)
		if err != nil {
			return f, nil, formError(err)
		}
		switch name := part.FormName(); {
		case name == fileField && len(b) > 0:
			raw = b
		case name != fileField && name != "":
			f.Add(name, string(b))
		}
	}
}

// Bounds of a picture chosen at a desk: a camera's own file, made as small as a phone makes its photos.
const (
	pictureMost = 50_000_000 // pixels
	pictureSide = 1600
)

// drawnAnew decodes a picture and draws it anew, at most 1600 pixels on its long side and turned upright, so that nothing
// of the camera's own file stays in it (where, when, with what).
func (s *Server) drawnAnew(raw []byte) ([]byte, error) {
	c, _, err := image.DecodeConfig(bytes.NewReader(raw))
	if err != nil || c.Width < 1 || c.Height < 1 {
		return nil, refuse(codeInvalid, fileField, s.words.Say("office.defect.photo_none"))
	}
	if c.Width > pictureMost/c.Height {
		return nil, refuse(codeTooLarge, fileField, s.words.Say("office.defect.photo_large"))
	}
	s.drawing.Lock() // one at a time: a large picture takes 200 MB while it is drawn
	defer s.drawing.Unlock()
	img, _, err := image.Decode(bytes.NewReader(raw))
	if err != nil {
		return nil, refuse(codeInvalid, fileField, s.words.Say("office.defect.photo_none"))
	}
	var out bytes.Buffer
	if err := jpeg.Encode(&out, fitted(img, turnOf(raw)), &jpeg.Options{Quality: 80}); err != nil {
		return nil, err
	}
	return out.Bytes(), nil
}

// fitted draws a picture smaller, each point the mean of what it covers, and turned as its camera held it.
func fitted(img image.Image, turn int) image.Image {
	b := img.Bounds()
	w, h := b.Dx(), b.Dy()
	if side := max(w, h); side > pictureSide {
		w, h = max(1, w*pictureSide/side), max(1, h*pictureSide/side)
	}
	small := image.NewRGBA(image.Rect(0, 0, w, h))
	for y := range h {
		y0, y1 := b.Min.Y+y*b.Dy()/h, b.Min.Y+max(y*b.Dy()/h+1, (y+1)*b.Dy()/h)
		for x := range w {
			x0, x1 := b.Min.X+x*b.Dx()/w, b.Min.X+max(x*b.Dx()/w+1, (x+1)*b.Dx()/w)
			var sum [3]uint64
			for v := y0; v < y1; v++ {
				for u := x0; u < x1; u++ {
					r, g, bl, _ := img.At(u, v).RGBA()
					sum[0], sum[1], sum[2] = sum[0]+uint64(r), sum[1]+uint64(g), sum[2]+uint64(bl)
				}
			}
			n := uint64((y1 - y0) * (x1 - x0))
			at := small.PixOffset(x, y)
			small.Pix[at], small.Pix[at+1], small.Pix[at+2], small.Pix[at+3] = byte(sum[0]/n>>8), byte(sum[1]/n>>8), byte(sum[2]/n>>8), 0xff
		}
	}
	return turned(small, turn)
}

// turned turns a picture clockwise by quarters.
func turned(img *image.RGBA, quarters int) image.Image {
	for range quarters {
		b := img.Bounds()
		out := image.NewRGBA(image.Rect(0, 0, b.Dy(), b.Dx()))
		for y := range b.Dy() {
			for x := range b.Dx() {
				out.SetRGBA(b.Dy()-1-y, x, img.RGBAAt(x, y))
			}
		}
		img = out
	}
	return img
}

// turnOf reads by how many quarters a JPEG is to be turned clockwise: the Orientation of its Exif header (tag 0x0112:
// 3 upside down, 6 and 8 on a side), 0 where it says nothing that is understood.
func turnOf(raw []byte) int {
	at := bytes.Index(raw[:min(len(raw), 4096)], []byte("Exif\x00\x00"))
	if at < 0 {
		return 0
	}
	tiff := raw[at+6 : min(len(raw), at+6+4096)]
	var order binary.ByteOrder = binary.BigEndian
	if bytes.HasPrefix(tiff, []byte("II")) {
		order = binary.LittleEndian
	}
	if len(tiff) < 10 {
		return 0
	}
	dir := int(order.Uint32(tiff[4:]))
	if dir < 8 || dir+2 > len(tiff) {
		return 0
	}
	for i := range int(order.Uint16(tiff[dir:])) {
		at := dir + 2 + 12*i
		if at+12 > len(tiff) {
			return 0
		}
		if order.Uint16(tiff[at:]) == 0x0112 {
			return map[uint16]int{3: 2, 6: 1, 8: 3}[order.Uint16(tiff[at+8:])]
		}
	}
	return 0
}
