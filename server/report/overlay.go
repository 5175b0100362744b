package report

import (
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"io"
	"math"
	"slices"
	"strconv"

	"golang.org/x/image/font"
	"golang.org/x/image/font/basicfont"
	"golang.org/x/image/math/fixed"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Colours of an overlay; chosen to be told apart in both common kinds of colour
// blindness, on a grey picture.
var (
	overlayRegion = color.RGBA{0x4c, 0xa3, 0xff, 0xff} // region and zones
	overlayDefect = color.RGBA{0xff, 0xb0, 0x00, 0xff} // defects that break no limit
	overlayReason = color.RGBA{0xff, 0x3b, 0x6f, 0xff} // defects named by a reason
)

// OverlayView is one view's picture and what was found in it.
type OverlayView struct {
	Name    string
	Frame   *raster.Plane
	Region  *pipeline.Region // nil = none found
	Defects []pipeline.Defect
	Broken  map[int]bool // ids of defects that a reason names
	// Coverage hatches the cells in which what the limits forbid would not have been found.
	Coverage *pipeline.CoverageMap // nil = not drawn
}

// WriteOverlay writes views beside each other as a PNG: the frame stretched between its
// 0.5 and 99.9 percentile, the region's outline, and every defect with its number.
func WriteOverlay(w io.Writer, views []OverlayView) error {
	width, height := 0, 0
	for _, v := range views {
		width += v.Frame.Width
		height = max(height, v.Frame.Height)
	}
	img := image.NewRGBA(image.Rect(0, 0, max(width, 1), max(height, 1)))
	x := 0
	for _, v := range views {
		drawView(img, v, x)
		x += v.Frame.Width
	}
	return png.Encode(w, img)
}

func drawView(img *image.RGBA, v OverlayView, x0 int) {
	drawFrame(img, v.Frame, x0)
	if v.Region != nil {
		drawOutline(img, v.Region.Mask(), x0)
	}
	if v.Coverage != nil {
		hatchBlind(img, v.Coverage, v.Frame, x0)
	}
	scale := max(1, v.Frame.Width/800)
	for _, d := range v.Defects {
		c := overlayDefect
		if v.Broken[d.ID] {
			c = overlayReason
		}
		drawDefect(img, d, x0, scale, c)
	}
	label(img, v.Name, x0+6*scale, v.Frame.Height-6*scale, scale, overlayRegion)
}

func drawFrame(img *image.RGBA, p *raster.Plane, x0 int) {
	low, high := Stretch(p)
	for y := range p.Height {
		row := p.Row(y)
		for x, v := range row {
			g := uint8(255 * min(max((v-low)/(high-low), 0), 1))
			img.SetRGBA(x0+x, y, color.RGBA{g, g, g, 0xff})
		}
	}
}

// Stretch returns the levels shown as black and white: the 0.5 and 99.9 percentiles of a
// sample of the pixels, at least one count apart.
func Stretch(p *raster.Plane) (low, high float32) {
	step := max(1, len(p.Pix)/200_000)
	var sample []float32
	for i := 0; i < len(p.Pix); i += step {
		sample = append(sample, p.Pix[i])
	}
	slices.Sort(sample)
	low, high = sample[len(sample)*5/1000], sample[min(len(sample)-1, len(sample)*999/1000)]
	return low, max(high, low+1)
}

// drawOutline marks the pixels inside the mask that touch one outside.
func drawOutline(img *image.RGBA, m *raster.Mask, x0 int) {
	for y := range m.Height {
		for x := range m.Width {
			if m.At(x, y) && !(m.At(x-1, y) && m.At(x+1, y) && m.At(x, y-1) && m.At(x, y+1)) {
				img.SetRGBA(x0+x, y, overlayRegion)
			}
		}
	}
}

// hatchBlind draws every eighth diagonal of the cells that were not inspected.
func hatchBlind(img *image.RGBA, m *pipeline.CoverageMap, frame *raster.Plane, x0 int) {
	for y := range frame.Height {
		for x := range frame.Width {
			if (x+y)%8 != 0 {
				continue
			}
			if i := y/m.CellPx*m.Columns + x/m.CellPx; m.Inside(i) && !m.Inspected(i) {
				img.SetRGBA(x0+x, y, overlayReason)
			}
		}
	}
}

func drawDefect(img *image.RGBA, d pipeline.Defect, x0, scale int, c color.RGBA) {
	margin := 4 * scale
	r := image.Rect(x0+d.Box.X0-margin, d.Box.Y0-margin, x0+d.Box.X1+margin, d.Box.Y1+margin)
	for i := range scale {
		frameRect(img, r.Inset(-i), c)
	}
	label(img, strconv.Itoa(d.ID), r.Max.X+2*scale, r.Min.Y+6*scale, scale, c)
}

func frameRect(img *image.RGBA, r image.Rectangle, c color.RGBA) {
	for x := r.Min.X; x < r.Max.X; x++ {
		img.SetRGBA(x, r.Min.Y, c)
		img.SetRGBA(x, r.Max.Y-1, c)
	}
	for y := r.Min.Y; y < r.Max.Y; y++ {
		img.SetRGBA(r.Min.X, y, c)
		img.SetRGBA(r.Max.X-1, y, c)
	}
}

// label writes text with its baseline at (x, y), enlarged by scale.
func label(img *image.RGBA, text string, x, y, scale int, c color.RGBA) {
	face := basicfont.Face7x13
	w := int(math.Ceil(float64(font.MeasureString(face, text)) / 64))
	small := image.NewAlpha(image.Rect(0, 0, w, 13))
	(&font.Drawer{Dst: small, Src: image.Opaque, Face: face, Dot: fixed.P(0, 11)}).DrawString(text)
	for sy := range 13 * scale {
		for sx := range w * scale {
			if small.AlphaAt(sx/scale, sy/scale).A > 128 {
				draw.Draw(img, image.Rect(x+sx, y+sy-11*scale, x+sx+1, y+sy-11*scale+1), image.NewUniform(c), image.Point{}, draw.Src)
			}
		}
	}
}
