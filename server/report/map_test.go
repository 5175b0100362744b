package report

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"

	"lapgate/pipeline"
)

// mapOfDigs has digs all over a disc and a cluster of scratches, and units left out.
func mapOfDigs() DefectMap {
	m := DefectMap{Title: "Defects of disc-25, lot L24-003", Coordinates: "part", Unit: "um", Units: 40, LeftOut: 102, LeftOutNames: []string{"D000007", "D<8>"},
		Zones: []MapZone{{Name: "clear", OuterDiameter: 23000}, {Name: "outer", OuterDiameter: 24000, InnerDiameter: 23000}}}
	r := rand.New(rand.NewPCG(3, 3))
	for i := range 160 {
		azimuth, radius := 2*math.Pi*r.Float64(), 11500*math.Sqrt(r.Float64())
		p := MapPoint{Unit: fmt.Sprintf("D%06d", i/4), Kind: "dig", Zone: "clear", X: radius * math.Cos(azimuth), Y: radius * math.Sin(azimuth), SizeUM: 80, Verdict: pipeline.Accept}
		if i%8 == 0 {
			p.Kind, p.X, p.Y, p.Verdict = "scratch", 4000+900*r.NormFloat64(), 6000+900*r.NormFloat64(), pipeline.Reject
		}
		m.Points = append(m.Points, p)
	}
	return m
}

// circlesOf parses a picture and returns its circles by radius.
func circlesOf(t *testing.T, svg []byte) map[string][][2]float64 {
	t.Helper()
	out := map[string][][2]float64{}
	d := xml.NewDecoder(bytes.NewReader(svg))
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			return out
		}
		if err != nil {
			t.Fatal(err)
		}
		start, ok := token.(xml.StartElement)
		if !ok || start.Name.Local != "circle" {
			continue
		}
		at := map[string]string{}
		for _, a := range start.Attr {
			at[a.Name.Local] = a.Value
		}
		x, _ := strconv.ParseFloat(at["cx"], 64)
		y, _ := strconv.ParseFloat(at["cy"], 64)
		out[at["r"]] = append(out[at["r"]], [2]float64{x, y})
	}
}

func TestMapPicture(t *testing.T) {
	m := mapOfDigs()
	var b bytes.Buffer
	if err := WriteMapPicture(&b, m); err != nil {
		t.Fatal(err)
	}
	circles := circlesOf(t, b.Bytes())
	marks := circles["3.2"]
	if len(marks) != len(m.Points) {
		t.Fatalf("%d marks, want %d", len(marks), len(m.Points))
	}
	// 23 mm and 24 mm about one middle; v goes up, so y goes down the picture.
	scale := mapSide / (2 * 1.04 * 12000)
	for i, p := range m.Points {
		x, y := mapMargin+mapSide/2+scale*p.X, mapHead+mapSide/2-scale*p.Y
		if math.Hypot(marks[i][0]-x, marks[i][1]-y) > 0.2 {
			t.Fatalf("mark %d at %v, want (%.1f, %.1f)", i, marks[i], x, y)
		}
	}
	for _, want := range []string{fmt.Sprintf("%.1f", scale*11500), fmt.Sprintf("%.1f", scale*12000)} {
		if len(circles[want]) == 0 {
			t.Errorf("no zone of radius %s px", want)
		}
	}
	for _, want := range []string{"clear", "outer", "dig 140", "scratch 20", "5 mm", "102 units left out, angle unknown"} {
		if !strings.Contains(b.String(), ">"+want) && !strings.Contains(b.String(), want) {
			t.Errorf("the picture does not say %q", want)
		}
	}
}

func TestMapPage(t *testing.T) {
	var b bytes.Buffer
	if err := WriteMap(&b, mapOfDigs()); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"D&lt;8&gt;", "and 100 more", "102 of 142 units are left out", `<td class="n">140</td><td class="n">3.500</td><td class="n">40</td>`} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("the page lacks %q", want)
		}
	}
}

// In the camera's frame y goes down and the frame is drawn.
func TestMapOfTheCamera(t *testing.T) {
	m := DefectMap{Title: "x", Coordinates: "camera", Unit: "px", Units: 1, WidthPx: 1600, HeightPx: 1200, Points: []MapPoint{{Unit: "u", Kind: "dig", X: 1600, Y: 1200}}}
	var b bytes.Buffer
	if err := WriteMapPicture(&b, m); err != nil {
		t.Fatal(err)
	}
	if at := circlesOf(t, b.Bytes())["3.2"]; len(at) != 1 || math.Abs(at[0][0]-(mapMargin+mapSide)) > 0.1 || math.Abs(at[0][1]-(mapHead+mapSide*0.75)) > 0.1 {
		t.Errorf("marks at %v", at)
	}
}
