package chromium

import (
	"bytes"
	"fmt"
	"image"
	"image/color"
	"image/jpeg"
	"os"
	"path/filepath"
	"testing"
)

const filmWidth, filmHeight = 640, 480

// Film writes a film of one frame (YUV4MPEG2) that shows a code, for Camera. dark says row by row which modules are dark; the
// quiet zone is the film's own white.
func Film(t testing.TB, dark [][]bool) string {
	t.Helper()
	module := (filmHeight - 80) / len(dark)
	left, top := (filmWidth-module*len(dark))/2, (filmHeight-module*len(dark))/2
	luma := bytes.Repeat([]byte{235}, filmWidth*filmHeight) // white of ITU-R BT.601
	for y, row := range dark {
		for x, is := range row {
			for i := 0; is && i < module*module; i++ {
				luma[(top+y*module+i/module)*filmWidth+left+x*module+i%module] = 16 // its black
			}
		}
	}
	film := append(fmt.Appendf(nil, "YUV4MPEG2 W%d H%d F10:1 Ip C420jpeg\nFRAME\n", filmWidth, filmHeight), luma...)
	film = append(film, bytes.Repeat([]byte{128}, filmWidth*filmHeight/2)...)
	return write(t, "label.y4m", film)
}

// Shot writes a picture as a phone's camera makes one: a JPEG larger than what is sent. Each shade is another picture.
func Shot(t testing.TB, shade uint8) string {
	t.Helper()
	picture := image.NewGray(image.Rect(0, 0, 2000, 1000))
	for i := range picture.Pix {
		picture.Pix[i] = shade
	}
	picture.SetGray(7, 7, color.Gray{Y: 255 - shade})
	var packed bytes.Buffer
	if err := jpeg.Encode(&packed, picture, nil); err != nil {
		t.Fatal(err)
	}
	return write(t, "shot.jpg", packed.Bytes())
}

func write(t testing.TB, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, content, 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}
