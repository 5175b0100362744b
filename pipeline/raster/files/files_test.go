package files

import (
	"bytes"
	"encoding/binary"
	"image"
	"image/color"
	"image/jpeg"
	"image/png"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"lapgate/pipeline/raster"
)

func randomFrame(f raster.PixelFormat, width, height int) raster.Raw {
	rnd := rand.New(rand.NewPCG(1, uint64(f)))
	counts := make([]uint16, width*height)
	for i := range counts {
		counts[i] = uint16(rnd.IntN(f.MaxCount() + 1))
	}
	counts[0], counts[len(counts)-1] = 0, uint16(f.MaxCount())
	return raster.Pack(f, counts, width, height)
}

func mustCounts(t *testing.T, r raster.Raw) []uint16 {
	t.Helper()
	counts, err := r.Counts()
	if err != nil {
		t.Fatal(err)
	}
	return counts
}

func TestEveryBitIsKept(t *testing.T) {
	for _, f := range raster.PixelFormats() {
		want := randomFrame(f, 37, 11)
		for _, ext := range []string{".pgm", ".png", ".tif", ".tiff", ".raw"} {
			path := filepath.Join(t.TempDir(), "frame"+ext)
			if err := Write(path, want); err != nil {
				t.Fatalf("%s %s: %v", f, ext, err)
			}
			got, err := Read(path, Options{SignificantBits: f.SignificantBits()})
			if err != nil {
				t.Fatalf("%s %s: %v", f, ext, err)
			}
			if !slices.Equal(mustCounts(t, got), mustCounts(t, want)) {
				t.Errorf("%s %s: counts differ", f, ext)
			}
			if got.Format.SignificantBits() != f.SignificantBits() {
				t.Errorf("%s %s: came back as %s", f, ext, got.Format)
			}
			if ext == ".raw" && (got.Format != f || !bytes.Equal(got.Data, want.Data)) {
				t.Errorf("%s %s: packing changed", f, ext)
			}
		}
	}
}

func TestNothingIsLeftBesideWrittenFile(t *testing.T) {
	dir := t.TempDir()
	if err := Write(filepath.Join(dir, "a.pgm"), randomFrame(raster.Mono8, 3, 3)); err != nil {
		t.Fatal(err)
	}
	entries, err := os.ReadDir(dir)
	if err != nil || len(entries) != 1 {
		t.Errorf("got %v, %v, want a.pgm alone", entries, err)
	}
}

func TestContentDecidesNotExtension(t *testing.T) {
	path := filepath.Join(t.TempDir(), "frame.png")
	var b bytes.Buffer
	if err := EncodePGM(&b, randomFrame(raster.Mono12, 4, 4)); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	r, err := Read(path, Options{})
	if err != nil || r.Format != raster.Mono12 {
		t.Errorf("got %s, %v, want Mono12", r.Format, err)
	}
}

// The text of netpbm's pgm(5) gives the rules; the samples are made up here.
func TestPGM(t *testing.T) {
	cases := []struct {
		name, text string
		format     raster.PixelFormat
		counts     []uint16
	}{
		{"binary, comments", "P5 # by hand\n# two by one\n2 1\n255\n\x07\xff", raster.Mono8, []uint16{7, 255}},
		{"binary 10 bits, high byte first", "P5\n2 1\n1023\n\x01\x02\x03\xff", raster.Mono10, []uint16{258, 1023}},
		{"first sample looks like white space", "P5\n1 1\n255\n\n", raster.Mono8, []uint16{10}},
		{"plain", "P2\n2 2\n4095\n0 17\n 4095\t3\n", raster.Mono12, []uint16{0, 17, 4095, 3}},
		{"plain 16 bits", "P2 1 1 65535 65535", raster.Mono16, []uint16{65535}},
	}
	for _, c := range cases {
		r, err := Decode(strings.NewReader(c.text), Options{})
		if err != nil || r.Format != c.format || !slices.Equal(mustCounts(t, r), c.counts) {
			t.Errorf("%s: got %s % x, %v, want %s %v", c.name, r.Format, r.Data, err, c.format, c.counts)
		}
	}
}

func TestRefusalsSayWhatWasFoundAndWanted(t *testing.T) {
	cases := []struct {
		name, text, want string
		options          Options
	}{
		{"unknown content", "GIF89a..", "starts with 47 49 46", Options{}},
		{"empty", "", "want PGM", Options{}},
		{"maxval", "P5\n1 1\n100\nx", "maxval: got 100, want 255, 1023, 4095 or 65535", Options{}},
		{"above maxval", "P5\n2 1\n1023\n\x00\x00\x04\x00", "count 1024 at pixel (1, 0), want at most maxval 1023", Options{}},
		{"plain above maxval", "P2\n2 1\n255\n1 256\n", "pixel (1, 0): count above maxval 255", Options{}},
		{"short", "P5\n2 2\n255\nabc", "got 3 bytes, want 4", Options{}},
		{"two pictures", "P5\n1 1\n255\naP5\n1 1\n255\na", "want 1 for one picture", Options{}},
		{"plain, more samples", "P2\n1 1\n255\n1 2", "after the last sample", Options{}},
		{"giant side", "P5\n65536 1\n255\n", "width: got 65536, want 1 to 65535", Options{}},
		{"giant picture", "P5\n65535 65535\n255\n", "take 8589672450 bytes to decode, want at most 536870912", Options{}},
		{"bits too few", "P5\n1 1\n4095\n\x0f\xff", "count 4095 at pixel (0, 0), want at most 1023 for 10 significant bits", Options{SignificantBits: 10}},
		{"bits too many", "P5\n1 1\n255\n1", "got 12 stated, want at most the 8", Options{SignificantBits: 12}},
		{"bits odd", "P5\n1 1\n255\n1", "got 9, want 8, 10, 12 or 16", Options{SignificantBits: 9}},
		{"not a number", "P5\n1 x\n255\n1", "height: got 'x'", Options{}},
		{"cut header", "P5\n1", "height: unexpected EOF", Options{}},
	}
	for _, c := range cases {
		_, err := Decode(strings.NewReader(c.text), c.options)
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want ...%s...", c.name, err, c.want)
		}
	}
}

func pngOf(t *testing.T, m image.Image) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := png.Encode(&b, m); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestColourRules(t *testing.T) {
	m := image.NewNRGBA(image.Rect(0, 0, 2, 1))
	m.SetNRGBA(0, 0, color.NRGBA{R: 200, G: 100, B: 50, A: 255})
	m.SetNRGBA(1, 0, color.NRGBA{R: 255, G: 255, B: 255, A: 255})
	data := pngOf(t, m)
	for rule, want := range map[ColourRule]uint16{
		ColourLuma:    124, // 59.8 + 58.7 + 5.7 = 124.2
		ColourLuma709: 118, // 42.52 + 71.52 + 3.61 = 117.65
		ColourRed:     200, ColourGreen: 100, ColourBlue: 50,
	} {
		r, err := Decode(bytes.NewReader(data), Options{Colour: rule})
		if err != nil || !slices.Equal(mustCounts(t, r), []uint16{want, 255}) {
			t.Errorf("rule %d: got %v, %v, want [%d 255]", rule, r.Data, err, want)
		}
	}
	if _, err := Decode(bytes.NewReader(data), Options{}); err == nil || !strings.Contains(err.Error(), "state a colour rule") {
		t.Errorf("no rule: got %v", err)
	}
}

func TestColour16BitKeepsAllBits(t *testing.T) {
	m := image.NewNRGBA64(image.Rect(0, 0, 1, 1))
	m.SetNRGBA64(0, 0, color.NRGBA64{R: 0x1234, G: 0xabcd, B: 1, A: 0xffff})
	r, err := Decode(bytes.NewReader(pngOf(t, m)), Options{Colour: ColourGreen})
	if err != nil || r.Format != raster.Mono16 || mustCounts(t, r)[0] != 0xabcd {
		t.Errorf("got %s % x, %v", r.Format, r.Data, err)
	}
}

func TestPNGRefusals(t *testing.T) {
	clearPixel := image.NewNRGBA(image.Rect(0, 0, 1, 1))
	palette := image.NewPaletted(image.Rect(0, 0, 1, 1), color.Palette{color.Black, color.White})
	oneBit := pngOf(t, image.NewGray(image.Rect(0, 0, 8, 8)))
	oneBit[24] = 1
	for want, data := range map[string][]byte{
		"alpha":                       pngOf(t, clearPixel),
		"palette":                     pngOf(t, palette),
		"bit depth: got 1, want 8 or": oneBit,
		"header chunk":                []byte("\x89PNG\r\n\x1a\n"),
	} {
		_, err := Decode(bytes.NewReader(data), Options{Colour: ColourRed})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want ...%s...", err, want)
		}
	}
}

// A header may announce any size; memory is taken only for what the file can hold.
func TestCraftedPNGHeaderIsRefusedBeforeMemoryIsTaken(t *testing.T) {
	data := pngOf(t, image.NewGray(image.Rect(0, 0, 1, 1)))
	binary.BigEndian.PutUint32(data[16:], 20000)
	binary.BigEndian.PutUint32(data[20:], 20000)
	binary.BigEndian.PutUint32(data[29:], crcIEEE(data[12:29]))
	_, err := Decode(bytes.NewReader(data), Options{})
	if err == nil || !strings.Contains(err.Error(), "cannot hold 20000 × 20000 pixels") {
		t.Errorf("got %v", err)
	}
}

func TestJPEG(t *testing.T) {
	grey := image.NewGray(image.Rect(0, 0, 16, 16))
	for i := range grey.Pix {
		grey.Pix[i] = 90
	}
	var b bytes.Buffer
	if err := jpeg.Encode(&b, grey, nil); err != nil {
		t.Fatal(err)
	}
	r, err := Decode(&b, Options{})
	if err != nil || r.Format != raster.Mono8 || r.Width != 16 {
		t.Fatalf("got %s %d wide, %v", r.Format, r.Width, err)
	}
	if c := mustCounts(t, r); c[0] < 89 || c[0] > 91 { // lossy: within one count on a flat picture
		t.Errorf("got %d, want 90", c[0])
	}
}

func TestSidecar(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "frame.raw")
	want := raster.Raw{Format: raster.Mono12p, Width: 3, Height: 2, Stride: 8, Data: []byte("0123456789abcdef")}
	if err := Write(path, want); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{path, filepath.Join(dir, "frame.json")} {
		got, err := Read(name, Options{})
		if err != nil || got.Stride != 8 || !bytes.Equal(got.Data, want.Data) {
			t.Errorf("%s: got %+v, %v", name, got, err)
		}
	}
	if err := os.WriteFile(path, []byte("short"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Read(path, Options{}); err == nil || !strings.Contains(err.Error(), "got 5 bytes, want 16") {
		t.Errorf("short pixels: %v", err)
	}
	for text, want := range map[string]string{
		`{"pixel_format":"Mono99","width":1,"height":1,"stride":1}`:                   `pixel format "Mono99"`,
		`{"pixel_format":"Mono8","width":1,"height":1,"stride":1,"gain":1}`:           `unknown field "gain"`,
		`{"pixel_format":"Mono8","width":9,"height":1,"stride":1}`:                    "stride: got 1 bytes, want at least 9",
		`{"pixel_format":"Mono8","width":65535,"height":65535,"stride":65535}`:        "want at most 536870912",
		`{"pixel_format":"Mono8","width":4611686018427387904,"height":4,"stride":99}`: "width: got",
	} {
		if err := os.WriteFile(filepath.Join(dir, "frame.json"), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := Read(path, Options{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want ...%s...", text, err, want)
		}
	}
}

func TestWriteRefusesUnknownExtension(t *testing.T) {
	err := Write(filepath.Join(t.TempDir(), "a.bmp"), randomFrame(raster.Mono8, 1, 1))
	if err == nil || !strings.Contains(err.Error(), `got ".bmp", want .pgm, .png, .tif`) {
		t.Errorf("got %v", err)
	}
}
