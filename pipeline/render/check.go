package render

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Check refuses a scene that cannot be drawn; the error starts with the key it is about.
func (s Scene) Check() error {
	if s.Format != 0 && s.Format != Format {
		return pipeline.Invalid("format: got %d, want %d", s.Format, Format)
	}
	checks := []func() error{s.checkTargets, s.checkRun, s.checkPart, s.Camera.check, s.checkLamp, s.checkViews, s.checkLines, s.checkProcesses, s.checkSpoilers}
	for _, check := range checks {
		if err := check(); err != nil {
			return err
		}
	}
	return nil
}

func (s Scene) checkRun() error {
	if _, err := time.Parse(time.RFC3339, s.Start); err != nil {
		return pipeline.Invalid("start: got %q, want a time such as 2024-03-04T06:00:00Z", s.Start)
	}
	for key, pattern := range map[string]string{"serial_pattern": s.SerialPattern, "lot_pattern": s.LotPattern} {
		if err := pipeline.CheckID(key, fmt.Sprintf(pattern, 1)); err != nil {
			return fmt.Errorf("%w; the pattern needs one %%d, such as D%%06d", err)
		}
	}
	return firstBad(
		atLeast("units", float64(s.Units), 1), atLeast("units_per_lot", float64(s.UnitsPerLot), 1),
		atLeast("seconds_per_unit", s.SecondsPerUnit, 0),
		within("calibration.dark", float64(s.Calibration.Dark), 0, 10000),
		within("calibration.stray", float64(s.Calibration.Stray), 0, 10000),
		within("calibration.response", float64(s.Calibration.Response), 0, 10000), within("calibration.part", float64(s.Calibration.Part), 0, 10000))
}

func (s Scene) checkTargets() error {
	seen := map[string]bool{FrameDark: true, FrameStray: true, FrameResponse: true}
	for i, t := range s.Calibration.Targets {
		key := fmt.Sprintf("calibration.targets[%d]", i)
		if err := firstBad(pipeline.CheckID(key+".name", t.Name), t.check()); err != nil {
			return fmt.Errorf("%s: %w", key, err)
		}
		if seen[t.Name] {
			return pipeline.Invalid("%s.name: got %q, want a name of its own", key, t.Name)
		}
		seen[t.Name] = true
	}
	return nil
}

func (s Scene) checkPart() error {
	p, c := s.Part, s.Camera
	return firstBad(pipeline.CheckID("part.number", p.Number),
		within("part.diameter_mm", p.DiameterMM, 0.1, 1e4), p.checkNotch(),
		within("part.clear_aperture_mm", p.ClearApertureMM, 0.05, p.DiameterMM),
		within("part.max_shift_px", p.MaxShiftPx, 0, float64(min(c.Width, c.Height))/2))
}

func (c Camera) check() error {
	if _, err := raster.ParsePixelFormat(c.PixelFormat); err != nil {
		return pipeline.Invalid("camera.pixel_format: %w", err)
	}
	return firstBad(pipeline.CheckID("camera.id", c.ID),
		within("camera.width", float64(c.Width), 16, 32768), within("camera.height", float64(c.Height), 16, 32768),
		within("camera.um_per_px", c.UMPerPx, 1e-3, 1e4), within("camera.gain_dn_per_e", c.GainDNPerE, 1e-6, 1e3),
		within("camera.dark_noise_e", c.DarkNoiseE, 0, 1e4), within("camera.response_spread", c.ResponseSpread, 0, 0.2),
		within("camera.dark_spread_dn", c.DarkSpreadDN, 0, 1e3), within("camera.blur_px", c.BlurPx, 0, 50),
		within("camera.black_level_dn", c.BlackLevelDN, 0, float64(c.format().MaxCount())),
		within("camera.hot_pixels", float64(c.HotPixels), 0, 1e5), within("camera.dead_pixels", float64(c.DeadPixels), 0, 1e5),
		c.HotPixelDN.check("camera.hot_pixel_dn"))
}

func (s Scene) checkLamp() error {
	r, c := s.Reference, s.Camera
	return firstBad(
		within("lamp.min_power", s.Lamp.MinPower, 0, 100), within("lamp.max_power", s.Lamp.MaxPower, s.Lamp.MinPower, 100),
		within("reference.x_px", float64(r.XPx), 0, float64(c.Width)), within("reference.y_px", float64(r.YPx), 0, float64(c.Height)),
		within("reference.width_px", float64(r.WidthPx), 0, float64(c.Width-r.XPx)),
		within("reference.height_px", float64(r.HeightPx), 0, float64(c.Height-r.YPx)))
}

func (s Scene) checkViews() error {
	if len(s.Views) == 0 {
		return pipeline.Invalid("views: got none, want at least one")
	}
	seen := map[string]bool{}
	for i, v := range s.Views {
		key := fmt.Sprintf("views[%d].", i)
		if seen[v.Name] {
			return pipeline.Invalid("%sname: %q is there twice", key, v.Name)
		}
		seen[v.Name] = true
		if err := v.check(key); err != nil {
			return err
		}
	}
	return nil
}

func (v View) check(key string) error {
	if v.Light == LightBar && (v.DirectionExponent < 2 || v.DirectionExponent > 16 || v.DirectionExponent%2 != 0) {
		return pipeline.Invalid("%sdirection_exponent: got %d, want an even number from 2 to 16", key, v.DirectionExponent)
	}
	return firstBad(pipeline.CheckID(key+"name", v.Name), oneOf(key+"light", v.Light, LightRing, LightBar, LightBack),
		within(key+"direction_floor", v.DirectionFloor, 0, 1), within(key+"vignetting", v.Vignetting, 0, 0.95),
		within(key+"strength", v.Strength, 0, 100), within(key+"stray_dn", v.StrayDN, 0, 1e5),
		within(key+"fixture_dn", v.FixtureDN, 0, 1e5), within(key+"reference_dn", v.ReferenceDN, 0, 1e5),
		within(key+"response_dn", v.ResponseDN, 0, 1e5), within(key+"level_dn", v.LevelDN, 0, 1e5))
}

func (s Scene) checkLines() error {
	if len(s.Lines) == 0 {
		return pipeline.Invalid("lines: got none, want at least one")
	}
	for i, l := range s.Lines {
		key := fmt.Sprintf("lines[%d].", i)
		err := firstBad(pipeline.CheckID(key+"name", l.Name), pipeline.CheckID(key+"station", l.Station),
			within(key+"defect_factor", l.DefectFactor, 0, 1000))
		if err != nil {
			return err
		}
	}
	return nil
}

func (d Distribution) check(key string) error {
	switch d.Shape {
	case "", ShapeConstant:
		return nil
	case ShapeUniform:
		return atLeast(key+".max", d.Max, d.Min)
	case ShapeLogUniform:
		return firstBad(atLeast(key+".min", d.Min, 1e-9), atLeast(key+".max", d.Max, d.Min))
	case ShapeLogNormal:
		return firstBad(within(key+".spread", d.Spread, 1, 100), atLeast(key+".median", d.Median, 1e-9), within(key+".median", d.Median, d.Min, d.Max))
	}
	return oneOf(key+".shape", d.Shape, ShapeConstant, ShapeUniform, ShapeLogUniform, ShapeLogNormal)
}

func firstBad(errs ...error) error {
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

func within(key string, got, low, high float64) error {
	if !(got >= low && got <= high) {
		return pipeline.Invalid("%s: got %g, want %g to %g", key, got, low, high)
	}
	return nil
}

func atLeast(key string, got, low float64) error {
	if !(got >= low) {
		return pipeline.Invalid("%s: got %g, want at least %g", key, got, low)
	}
	return nil
}

func oneOf(key, got string, want ...string) error {
	if slices.Contains(want, got) {
		return nil
	}
	return pipeline.Invalid("%s: got %q, want one of %s", key, got, strings.Join(want, ", "))
}
