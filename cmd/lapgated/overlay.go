package main

import (
	"os"

	"lapgate/pipeline"
	"lapgate/server/report"
)

// writeOverlay writes the overlay of all views that could be unpacked. The numbers are
// those of the unit's defects; each is drawn in every view that saw it.
func writeOverlay(path string, e pipeline.Evidence, j pipeline.Judgement, results []pipeline.ViewResult) error {
	broken := map[int]bool{}
	for _, r := range j.Reasons {
		broken[r.DefectID] = true
	}
	var views []report.OverlayView
	for _, res := range results {
		frame, err := res.Item.Raw()
		if err != nil {
			return err
		}
		views = append(views, report.OverlayView{Name: res.Item.View, Frame: frame, Region: res.Item.Region,
			Defects: seenIn(e.Defects, res.Item), Broken: broken, Coverage: res.Item.CoverageMap})
	}
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	if err := report.WriteOverlay(f, views); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}

// seenIn returns the unit's defects that a view saw, with that view's own box.
func seenIn(all []pipeline.Defect, item *pipeline.Item) []pipeline.Defect {
	var out []pipeline.Defect
	for _, d := range all {
		if len(d.MergedFrom) == 0 && d.View == item.View {
			out = append(out, d)
		}
		for _, ref := range d.MergedFrom {
			if ref.View == item.View {
				d.Box = boxOf(item.Defects, ref.ID)
				out = append(out, d)
				break
			}
		}
	}
	return out
}

func boxOf(list []pipeline.Defect, id int) pipeline.Box {
	for _, d := range list {
		if d.ID == id {
			return d.Box
		}
	}
	return pipeline.Box{}
}
