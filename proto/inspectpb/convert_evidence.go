package inspectpb

import (
	"maps"

	"lapgate/pipeline"
)

// FromEvidence encodes all that an inspection found.
func FromEvidence(e pipeline.Evidence) *Evidence {
	return &Evidence{
		Views: each(e.Views, FromViewEvidence), Defects: FromDefects(e.Defects), Measurements: each(e.Measurements, fromMeasurement),
		Coverage: e.Coverage, Failures: FromFailures(e.Failures), Truncated: e.Truncated, Saturated: e.Saturated,
	}
}

// ToEvidence decodes evidence; the error says which view's which frame is wrong.
func ToEvidence(e *Evidence) (pipeline.Evidence, error) {
	views, err := tryEach("views", e.GetViews(), ToViewEvidence)
	return pipeline.Evidence{
		Views: views, Defects: ToDefects(e.GetDefects()), Measurements: each(e.GetMeasurements(), toMeasurement),
		Coverage: e.GetCoverage(), Failures: ToFailures(e.GetFailures()), Truncated: e.GetTruncated(), Saturated: e.GetSaturated(),
	}, err
}

// FromViewEvidence encodes what one view showed.
func FromViewEvidence(v pipeline.ViewEvidence) *ViewEvidence {
	return &ViewEvidence{
		Name: v.Name, Frames: each(v.Frames, fromFrameEvidence), UmPerPx: v.UMPerPx, Calibration: v.Calibration,
		Region: fromRegion(v.Region), Coverage: fromCoverage(v.Coverage), CoverageMap: fromCoverageMap(v.CoverageMap), Proofs: each(v.Proofs, fromProof),
		Measurements: each(v.Measurements, fromMeasurement), Defects: FromDefects(v.Defects), Truncated: v.Truncated,
		Milliseconds: maps.Clone(v.Milliseconds),
	}
}

// ToViewEvidence decodes what one view showed.
func ToViewEvidence(v *ViewEvidence) (pipeline.ViewEvidence, error) {
	frames, err := tryEach("frames", v.GetFrames(), toFrameEvidence)
	return pipeline.ViewEvidence{
		Name: v.GetName(), Frames: frames, UMPerPx: v.GetUmPerPx(), Calibration: v.GetCalibration(),
		Region: toRegion(v.GetRegion()), Coverage: toCoverage(v.GetCoverage()), CoverageMap: toCoverageMap(v.GetCoverageMap()), Proofs: each(v.GetProofs(), toProof),
		Measurements: each(v.GetMeasurements(), toMeasurement), Defects: ToDefects(v.GetDefects()), Truncated: v.GetTruncated(),
		Milliseconds: maps.Clone(v.GetMilliseconds()),
	}, err
}

func fromFrameEvidence(f pipeline.FrameEvidence) *FrameEvidence {
	return &FrameEvidence{Header: FromFrameHeader(f.Header), Stored: f.Stored}
}

func toFrameEvidence(f *FrameEvidence) (pipeline.FrameEvidence, error) {
	h, err := ToFrameHeader(f.GetHeader())
	return pipeline.FrameEvidence{Header: h, Stored: f.GetStored()}, err
}

func fromRegion(r pipeline.RegionEvidence) *RegionEvidence {
	return &RegionEvidence{CentreX: r.CentreX, CentreY: r.CentreY, RadiusPx: r.RadiusPx,
		Zones: each(r.Zones, func(z pipeline.ZoneEvidence) *ZoneEvidence {
			return &ZoneEvidence{Name: z.Name, AreaMm2: z.AreaMM2, EquivalentDiameterMm: z.EquivalentDiameterMM,
				OuterDiameterMm: z.OuterDiameterMM, InnerDiameterMm: z.InnerDiameterMM}
		})}
}

func toRegion(r *RegionEvidence) pipeline.RegionEvidence {
	return pipeline.RegionEvidence{CentreX: r.GetCentreX(), CentreY: r.GetCentreY(), RadiusPx: r.GetRadiusPx(),
		Zones: each(r.GetZones(), func(z *ZoneEvidence) pipeline.ZoneEvidence {
			return pipeline.ZoneEvidence{Name: z.GetName(), AreaMM2: z.GetAreaMm2(), EquivalentDiameterMM: z.GetEquivalentDiameterMm(),
				OuterDiameterMM: z.GetOuterDiameterMm(), InnerDiameterMM: z.GetInnerDiameterMm()}
		})}
}

func fromCoverage(c pipeline.Coverage) *Coverage {
	return &Coverage{Share: c.Share, Background: c.Background, Noise: c.Noise,
		SaturatedPx: clamp32(c.SaturatedPx), MaskedPx: clamp32(c.MaskedPx)}
}

func toCoverage(c *Coverage) pipeline.Coverage {
	return pipeline.Coverage{Share: c.GetShare(), Background: c.GetBackground(), Noise: c.GetNoise(),
		SaturatedPx: int(c.GetSaturatedPx()), MaskedPx: int(c.GetMaskedPx())}
}

// FromProof encodes a proof.
func FromProof(p pipeline.Proof) *Proof { return fromProof(p) }

// ToProof decodes a proof.
func ToProof(p *Proof) pipeline.Proof { return toProof(p) }

func fromProof(p pipeline.Proof) *Proof {
	return &Proof{Name: p.Name, Value: p.Value, Low: p.Low, High: p.High, Unit: p.Unit, Ok: p.OK, Reason: p.Reason,
		WarnLow: p.WarnLow, WarnHigh: p.WarnHigh, Warning: p.Warning}
}

func toProof(p *Proof) pipeline.Proof {
	return pipeline.Proof{Name: p.GetName(), Value: p.GetValue(), Low: p.GetLow(), High: p.GetHigh(), Unit: p.GetUnit(), OK: p.GetOk(), Reason: p.GetReason(),
		WarnLow: p.GetWarnLow(), WarnHigh: p.GetWarnHigh(), Warning: p.GetWarning()}
}

func fromMeasurement(m pipeline.Measurement) *Measurement {
	return &Measurement{Name: m.Name, Value: m.Value, Unit: m.Unit}
}

func toMeasurement(m *Measurement) pipeline.Measurement {
	return pipeline.Measurement{Name: m.GetName(), Value: m.GetValue(), Unit: m.GetUnit()}
}

func fromCoverageMap(m *pipeline.CoverageMap) *CoverageMap {
	if m == nil {
		return nil
	}
	return &CoverageMap{CellPx: clamp32(m.CellPx), Columns: clamp32(m.Columns), Rows: clamp32(m.Rows), DigUm: each(m.DigUM, clamp32), ScratchUm: each(m.ScratchUM, clamp32),
		NoisyShare: m.NoisyShare, UnseenShare: m.UnseenShare, SaturatedShare: m.SaturatedShare,
		DigLimitUm: clamp32(m.DigLimitUM), ScratchLimitUm: clamp32(m.ScratchLimitUM)}
}

func toCoverageMap(m *CoverageMap) *pipeline.CoverageMap {
	if m == nil {
		return nil
	}
	whole := func(v int32) int { return int(v) }
	return &pipeline.CoverageMap{CellPx: int(m.GetCellPx()), Columns: int(m.GetColumns()), Rows: int(m.GetRows()), DigUM: each(m.GetDigUm(), whole), ScratchUM: each(m.GetScratchUm(), whole),
		NoisyShare: m.GetNoisyShare(), UnseenShare: m.GetUnseenShare(), SaturatedShare: m.GetSaturatedShare(),
		DigLimitUM: int(m.GetDigLimitUm()), ScratchLimitUM: int(m.GetScratchLimitUm())}
}
