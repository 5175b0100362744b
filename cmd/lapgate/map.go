package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/report"
)

// mapFlags is the command line of the map verb.
type mapFlags struct {
	filterFlags
	coordinates, view, out string
	kinds                  []string
	json, csv              bool
}

func mapCommand() *cobra.Command {
	var f mapFlags
	c := &cobra.Command{
		Use:   "map --part P --coordinates part|station|camera [--out FILE.svg|FILE.html]",
		Short: "Show where the defects of many units lie: on the part, as it lay, or in the camera's frame",
		Long: `Show where the defects of the units of a lot or a span of time lie, each unit by its last
showing. Coordinates: part, turned back by the angle that a datum mark gives (units whose
angle is unknown are left out and named); station, as the part lay; camera, in the frame of
one view as received, where dirt and hot pixels stand still.

--out writes a picture (.svg) or a page (.html).`,
		Args: cobra.NoArgs,
	}
	server := serverFlag(c)
	f.add(c.Flags())
	c.Flags().StringVar(&f.coordinates, "coordinates", "", "part, station or camera (required)")
	c.Flags().StringVar(&f.view, "view", "", "only defects as this view found them; empty = as merged")
	c.Flags().StringSliceVar(&f.kinds, "kind", nil, "only these kinds")
	c.Flags().StringVar(&f.out, "out", "", "write the map to this file, .svg or .html")
	tableFlags(c, &f.json, &f.csv)
	c.RunE = func(c *cobra.Command, _ []string) error {
		m, err := f.ask(c.Context(), *server)
		if err != nil {
			return err
		}
		if f.out != "" {
			if err := writeMap(f.out, m); err != nil {
				return err
			}
		}
		return mapDisplay(m).write(c.OutOrStdout(), f.json, f.csv)
	}
	return c
}

func (f *mapFlags) ask(ctx context.Context, server string) (report.DefectMap, error) {
	var m report.DefectMap
	filter, err := f.filter()
	if err != nil {
		return m, err
	}
	coordinates, err := inspectpb.FromCoordinates(f.coordinates)
	if err != nil {
		return m, err
	}
	if ext := filepath.Ext(f.out); f.out != "" && ext != ".svg" && ext != ".html" {
		return m, pipeline.Invalid("out: got %s, want a name that ends in .svg or .html", f.out)
	}
	err = ask(ctx, server, func(ctx context.Context, conn *grpc.ClientConn) error {
		r, err := inspectpb.NewYieldServiceClient(conn).GetDefectMap(ctx, &inspectpb.GetDefectMapRequest{Filter: filter, Coordinates: coordinates, View: f.view, Kinds: f.kinds})
		if err == nil {
			m, err = f.newMap(r)
		}
		return err
	})
	return m, err
}

func (f *mapFlags) newMap(r *inspectpb.GetDefectMapResponse) (report.DefectMap, error) {
	m := report.DefectMap{Title: f.title(), Coordinates: f.coordinates, Unit: r.GetUnit(), Units: int(r.GetUnits()), LeftOut: int(r.GetUnitsLeftOut()),
		LeftOutNames: orEmpty(r.GetLeftOut()), WidthPx: int(r.GetWidthPx()), HeightPx: int(r.GetHeightPx()), Truncated: r.GetTruncated()}
	for _, p := range r.GetPoints() {
		verdict, err := inspectpb.ToVerdict(p.GetVerdict())
		if err != nil {
			return m, err
		}
		m.Points = append(m.Points, report.MapPoint{Unit: p.GetUnit(), Kind: p.GetKind(), Zone: p.GetZone(), X: p.GetX(), Y: p.GetY(), SizeUM: p.GetSizeUm(), Verdict: verdict})
	}
	for _, z := range r.GetZones() {
		m.Zones = append(m.Zones, report.MapZone{Name: z.GetName(), X: z.GetCentreX(), Y: z.GetCentreY(), OuterDiameter: z.GetOuterDiameter(), InnerDiameter: z.GetInnerDiameter()})
	}
	return m, nil
}

// title says what the map is of.
func (f *mapFlags) title() string {
	words := []string{"Defects of " + f.part}
	for _, w := range []struct{ name, value string }{{"process", f.process}, {"lot", f.lot}, {"line", f.line}, {"station", f.station}, {"view", f.view}, {"from", f.from}, {"to", f.to}} {
		if w.value != "" {
			words = append(words, w.name+" "+w.value)
		}
	}
	return strings.Join(words, ", ")
}

func writeMap(path string, m report.DefectMap) error {
	file, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.Remove(file.Name()) // fails once renamed, as it should
	write := report.WriteMap
	if filepath.Ext(path) == ".svg" {
		write = func(w io.Writer, m report.DefectMap) error { return report.WriteMapPicture(w, m) }
	}
	err = write(file, m)
	if closing := file.Close(); err == nil {
		err = closing
	}
	if err == nil {
		err = os.Chmod(file.Name(), 0o644)
	}
	if err != nil {
		return err
	}
	return os.Rename(file.Name(), path)
}

// mapPoint is one defect on a map, mapZone one of the limits' zones.
type mapPoint struct {
	Unit    string           `json:"unit"`
	Kind    string           `json:"kind"`
	Zone    string           `json:"zone"`
	X       float64          `json:"x"`
	Y       float64          `json:"y"`
	SizeUM  float64          `json:"size_um"` // diameter, or length of what is long
	Verdict pipeline.Verdict `json:"verdict"` // of the unit
}

type mapZone struct {
	Name          string  `json:"name"`
	X             float64 `json:"centre_x"`
	Y             float64 `json:"centre_y"`
	OuterDiameter float64 `json:"outer_diameter"`
	InnerDiameter float64 `json:"inner_diameter"`
}

func mapDisplay(m report.DefectMap) display {
	points, zones := []mapPoint{}, []mapZone{}
	d := display{head: []string{"unit", "kind", "zone", "x_" + m.Unit, "y_" + m.Unit, "size_um", "verdict"}}
	for _, p := range m.Points {
		points = append(points, mapPoint(p))
		d.rows = append(d.rows, []string{p.Unit, p.Kind, p.Zone, real64(p.X), real64(p.Y), real64(p.SizeUM), string(p.Verdict)})
	}
	for _, z := range m.Zones {
		zones = append(zones, mapZone(z))
	}
	rows := m.Rows()
	d.document = map[string]any{"coordinates": m.Coordinates, "unit": m.Unit, "units": m.Units, "units_left_out": m.LeftOut, "left_out": m.LeftOutNames,
		"truncated": m.Truncated, "zones": zones, "counts": orEmpty(rows), "points": points}
	d.forEye = [][]string{{"zone", "kind", "defects", "per unit", "units with one"}}
	for _, r := range rows {
		d.forEye = append(d.forEye, []string{r.Zone, r.Kind, fmt.Sprint(r.Defects), fmt.Sprintf("%.3f", r.PerUnit), fmt.Sprint(r.Units)})
	}
	d.forEye = append(d.forEye, []string{fmt.Sprintf("(%d units; %d left out, angle unknown%s)", m.Units, m.LeftOut, fewNames(m.LeftOutNames))})
	return d
}

func fewNames(names []string) string {
	const few = 10
	switch {
	case len(names) == 0:
		return ""
	case len(names) > few:
		return ": " + strings.Join(names[:few], ", ") + " …"
	}
	return ": " + strings.Join(names, ", ")
}
