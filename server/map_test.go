package server_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/plugins/stagetest"
	"lapgate/proto/inspectpb"
)

// mapOf asks for a map of the rendered disc.
func (r *rig) mapOf(c inspectpb.Coordinates, view string) (*inspectpb.GetDefectMapResponse, error) {
	return r.yield.GetDefectMap(context.Background(), &inspectpb.GetDefectMapRequest{Filter: &inspectpb.Filter{Part: "disc"}, Coordinates: c, View: view})
}

// A dig at one place of every part lies scattered as the parts lay, and in one place on the
// part; units without the mark are left out of that and named.
func TestDefectMapInThreeCoordinates(t *testing.T) {
	s := stagetest.SmallScene()
	s.Part.Notch.DepthUM, s.Part.Notch.WidthUM = 180, 320
	scene := stagetest.Render(t, s)
	plain := s
	plain.Part.Notch.DepthUM = 0
	unmarked := stagetest.Render(t, plain)
	recipe := strings.Replace(renderedRecipe, "unit: [{type: merge}, {type: classify}]",
		"unit: [{type: merge}, {type: classify}, {type: datum, view: ring, width_mm: 0.32, polarity: dark, inner_diameter_mm: 5.85, outer_diameter_mm: 6.05}]", 1)
	r := newRig(t, rigOptions{recipe: recipe, calibrations: scene.Calibrations})
	const units = 6
	turns := map[string]float64{}
	for i := range units {
		u := scene.Unit(i)
		on(&u, spot(pipeline.Dig, 1200, 500, 100))
		turns[u.Identity.Unit] = u.PartAngleDeg
		r.inspectRendered(scene, u)
	}
	if _, err := r.mapOf(inspectpb.Coordinates_COORDINATES_UNSPECIFIED, ""); status.Code(err) != codes.InvalidArgument {
		t.Errorf("no coordinates: %v", err)
	}
	if _, err := r.mapOf(inspectpb.Coordinates_COORDINATES_STATION, "left"); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "[ring]") {
		t.Errorf("no such view: %v", err)
	}
	for i := range 2 {
		u := unmarked.Unit(units + i)
		on(&u, spot(pipeline.Dig, 1200, 500, 100))
		r.inspectRendered(unmarked, u)
	}
	part, err := r.mapOf(inspectpb.Coordinates_COORDINATES_PART, "")
	must(t, err)
	if part.Units != units || part.UnitsLeftOut != 2 || strings.Join(part.LeftOut, " ") != "T008 T007" || len(part.Points) != units || part.Unit != "um" {
		t.Fatalf("part: %d units, left out %v, %d points", part.Units, part.LeftOut, len(part.Points))
	}
	for _, p := range part.Points {
		if d := math.Hypot(p.X-1200, p.Y-500); d > 40 || p.Kind != "dig" {
			t.Errorf("unit %s: %s at (%.0f, %.0f) on the part, want a dig at (1200, 500)", p.Unit, p.Kind, p.X, p.Y)
		}
	}
	if len(part.Zones) != 1 || math.Abs(part.Zones[0].OuterDiameter-5500) > 1 {
		t.Errorf("zones %v, want one of 5500 µm", part.Zones)
	}
	station, err := r.mapOf(inspectpb.Coordinates_COORDINATES_STATION, "")
	must(t, err)
	if station.Units != units+2 || station.UnitsLeftOut != 0 {
		t.Errorf("station: %d units, %d left out", station.Units, station.UnitsLeftOut)
	}
	for _, p := range station.Points {
		if turn, marked := turns[p.Unit]; marked {
			got := math.Atan2(p.Y, p.X)*180/math.Pi - math.Atan2(500, 1200)*180/math.Pi
			if off := math.Remainder(got-turn, 360); math.Abs(off) > 2 {
				t.Errorf("unit %s: turned by %.1f° at the station, lay at %.1f°", p.Unit, got, turn)
			}
		}
	}
	camera, err := r.mapOf(inspectpb.Coordinates_COORDINATES_CAMERA, "")
	must(t, err)
	if camera.Unit != "px" || camera.WidthPx != 400 || camera.HeightPx != 360 || len(camera.Points) != units+2 || math.Abs(camera.Zones[0].OuterDiameter-275) > 1 {
		t.Errorf("camera: %s, %d × %d px, %d points, zones %v", camera.Unit, camera.WidthPx, camera.HeightPx, len(camera.Points), camera.Zones)
	}
}

// Without any mark a map of the part is an error that says what to do; one of the station is not.
func TestPartMapRefusesUnknownAngles(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i := range 3 {
		l.showUnit(fmt.Sprintf("u%d", i), uint64(i), 8)
	}
	l.finish()
	_, err := r.mapOf(inspectpb.Coordinates_COORDINATES_PART, "")
	if status.Code(err) != codes.NotFound || !strings.Contains(err.Error(), "the angle of all 3 units is unknown (such as [u2 u1 u0])") || !strings.Contains(err.Error(), "stage datum") {
		t.Errorf("part: %v", err)
	}
	if m, err := r.mapOf(inspectpb.Coordinates_COORDINATES_STATION, ""); err != nil || len(m.Points) != 3 {
		t.Errorf("station: %v, %v", m, err)
	}
	if _, err := r.mapOf(inspectpb.Coordinates_COORDINATES_CAMERA, ""); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "want one of [ring bar]") {
		t.Errorf("camera without a view: %v", err)
	}
	if m, err := r.mapOf(inspectpb.Coordinates_COORDINATES_CAMERA, "bar"); err != nil || math.Hypot(m.Points[0].X-40, m.Points[0].Y-50) > 1 {
		t.Errorf("camera: %v, %v", m, err)
	}
	if _, err := r.yield.GetDefectMap(context.Background(), &inspectpb.GetDefectMapRequest{Filter: &inspectpb.Filter{Part: "other"}, Coordinates: inspectpb.Coordinates_COORDINATES_STATION}); status.Code(err) != codes.NotFound {
		t.Errorf("no units: %v", err)
	}
}
