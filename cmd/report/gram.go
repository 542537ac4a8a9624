package report

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"html/template"
	"image"
	"image/color"
	"image/png"
	"math"
)

// ramp are the colours of a spectrogram from quiet to loud. Their lightness rises throughout, so that they are told
// apart without colour vision and in grey print.
var ramp = [...]color.RGBA{{12, 14, 28, 255}, {38, 44, 110, 255}, {32, 106, 140, 255}, {62, 168, 120, 255}, {190, 212, 70, 255}, {255, 250, 205, 255}}

// gramDepth is how far below its loudest cell a spectrogram reaches, in dB.
const gramDepth = 80

// picture is an image in the plot area of a figure.
type picture struct {
	id   string
	data string // of the PNG, base64
}

// held returns the image for both sizes of the figure to use; nothing where it has none.
func (f figure) held() template.HTML {
	if f.image == nil {
		return ""
	}
	return template.HTML(fmt.Sprintf(`<svg class="held" width="0" height="0" aria-hidden="true"><defs><image id="%s" width="1" height="1" preserveAspectRatio="none" href="data:image/png;base64,%s"/></defs></svg>`+"\n", f.image.id, f.image.data))
}

// use draws the image over the whole plot area.
func (i *picture) use(p *pen, across, height float64) {
	p.put(`<use href="#%s" transform="scale(%s %s)"/>`+"\n", i.id, px(across), px(height))
}

// gramFigure draws a spectrogram; that of silence has no image.
func gramFigure(g *Gram) (figure, error) {
	f := figure{
		title: "Spectrogram of " + clean(g.Layer),
		x:     axis{label: "time on the track", unit: "s", time: true, hi: math.Max(g.Duration, 1e-3)},
		y:     axis{label: "frequency, Hz", unit: "Hz", hi: math.Max(g.Top, 1)}, seeks: true,
	}
	loudest := math.Inf(-1)
	rows := 1
	for _, column := range g.Level {
		rows = max(rows, len(column))
		for _, v := range column {
			loudest = math.Max(loudest, v)
		}
	}
	if gap(loudest) {
		return f, nil
	}
	top := math.Ceil(loudest/10) * 10
	const shades = 128
	palette := make(color.Palette, shades)
	for i := range palette {
		palette[i] = shade(float64(i) / (shades - 1))
	}
	m := image.NewPaletted(image.Rect(0, 0, max(1, len(g.Level)), rows), palette)
	for x, column := range g.Level {
		for y, v := range column {
			if !gap(v) {
				at := math.Max(0, math.Min(1, 1+(v-top)/gramDepth))
				m.SetColorIndex(x, rows-1-y, uint8(math.Round(at*(shades-1))))
			}
		}
	}
	var b bytes.Buffer
	if err := (&png.Encoder{CompressionLevel: png.BestCompression}).Encode(&b, m); err != nil {
		return f, err
	}
	f.image = &picture{id: "gram-" + slug(g.Layer), data: base64.StdEncoding.EncodeToString(b.Bytes())}
	f.scale = []string{fixed(top-gramDepth, 0) + " dBFS", fixed(top, 0) + " dBFS"}
	f.text = "Brightness is the level, from " + f.scale[0] + " (dark) to " + f.scale[1] + " (bright)."
	return f, nil
}

// shade returns the colour at 0 to 1 of the ramp.
func shade(at float64) color.RGBA {
	at *= float64(len(ramp) - 1)
	i := min(int(at), len(ramp)-2)
	mix := func(a, b uint8) uint8 {
		return uint8(math.Round(float64(a) + (at-float64(i))*(float64(b)-float64(a))))
	}
	a, b := ramp[i], ramp[i+1]
	return color.RGBA{mix(a.R, b.R), mix(a.G, b.G), mix(a.B, b.B), 255}
}

// ramps draws the key of a spectrogram's colours with the levels of its ends.
func (f figure) ramps(p *pen, x, y float64) {
	const steps, wide = 24, 5.
	p.words(x, y+10, "note", "start", f.scale[0])
	from := x + letter*float64(len([]rune(f.scale[0]))) + 18
	for i := range steps {
		c := shade(float64(i) / (steps - 1))
		p.put(`<rect x="%s" y="%s" width="%s" height="12" fill="#%02x%02x%02x"/>`+"\n", px(from+wide*float64(i)), px(y), px(wide+0.5), c.R, c.G, c.B)
	}
	p.words(from+wide*steps+8, y+10, "note", "start", f.scale[1])
}
