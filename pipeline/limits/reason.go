package limits

import (
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

// unjudged is the reason of a limit that could not be judged: always a hold.
func (l *limit) unjudged(defect int, why string) pipeline.Reason {
	return l.reason(defect, pipeline.Hold, "cannot be judged: "+why)
}

func (l *limit) reason(defect int, v pipeline.Verdict, text string) pipeline.Reason {
	return pipeline.Reason{Name: l.Name, Verdict: v, Text: text, Zone: l.Zone, DefectID: defect, Unit: l.Unit, Rule: l.rule.Text()}
}

// calls returns the verdict that the limit calls for when it is broken for certain.
func (l *limit) calls(certain bool) pipeline.Verdict {
	if l.Verdict == string(pipeline.Hold) || !certain {
		return pipeline.Hold
	}
	return pipeline.Reject
}

// condition is broken when the rule is true.
func (l *limit) condition(values rules.Values, defect int, subject func() string, certain bool) []pipeline.Reason {
	broken, err := l.rule.Bool(values)
	if err != nil {
		return []pipeline.Reason{l.unjudged(defect, err.Error())}
	}
	if !broken {
		return nil
	}
	return []pipeline.Reason{l.reason(defect, l.calls(certain), fmt.Sprintf("%s: %s", subject(), l.rule.Text()))}
}

// bounds holds a value against at_most and at_least with the guard band of ISO 14253-1.
func (l *limit) bounds(value float64, defect int, subject func() string, whole bool) []pipeline.Reason {
	var out []pipeline.Reason
	u := l.uncertainty(value)
	if l.AtMost != nil && value > *l.AtMost-u {
		out = append(out, l.bound(value, *l.AtMost, u, value > *l.AtMost+u, "at most", defect, subject))
	}
	if l.AtLeast != nil && value < *l.AtLeast+u {
		certain := value < *l.AtLeast-u && (whole || defect != 0)
		out = append(out, l.bound(value, *l.AtLeast, u, certain, "at least", defect, subject))
	}
	return out
}

func (l *limit) uncertainty(value float64) float64 {
	return max(l.Uncertainty, l.UncertaintyPercent/100*math.Abs(value))
}

func (l *limit) bound(value, at, u float64, certain bool, side string, defect int, subject func() string) pipeline.Reason {
	text := fmt.Sprintf("%s: %s is %.6g %s, %s %.6g allowed (by %+.4g)", subject(), l.rule.Text(), value, l.Unit, side, at, value-at)
	if u > 0 {
		text += fmt.Sprintf(", uncertainty %.4g", u)
	}
	if !certain {
		text += ": neither kept nor broken for certain"
	}
	r := l.reason(defect, l.calls(certain), text)
	r.Value, r.Limit, r.Over = value, at, value-at
	return r
}
