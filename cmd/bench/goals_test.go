package main

import (
	"io"
	"maps"
	"math"
	"path/filepath"
	"strings"
	"testing"
)

// reached is every figure just at what is required, or at its aim.
func reached() map[string]figure {
	out := map[string]figure{}
	for _, g := range goals() {
		out[g.figure] = figure{Value: g.required}
		if g.required == 0 {
			out[g.figure] = figure{Value: g.aim}
		}
	}
	return out
}

func TestReport(t *testing.T) {
	for name, tc := range map[string]struct {
		figure string
		value  float64 // in its place; +Inf = not measured
		short  bool
		only   string
		fails  bool
		says   string
	}{
		"all reached":                   {says: "misses the aim: fused_vs_opencv_tuned_1t is 10, want at least 20\n"},
		"just missed from below":        {figure: "fused_vs_opencv_tuned_1t", value: math.Nextafter(10, 0), fails: true, says: "misses what is required: fused_vs_opencv_tuned_1t is 10, want at least 10 (best of 3)\n"},
		"just missed from above":        {figure: "grpc_to_verdict_over_fused", value: math.Nextafter(4, 5), fails: true, says: "misses what is required: grpc_to_verdict_over_fused is 4, want at most 4 (best of 3)\n"},
		"required, but no failure":      {figure: "grpc_to_verdict_vs_opencv_tuned", value: 4.9, says: "misses what is required: grpc_to_verdict_vs_opencv_tuned is 4.9, want at least 5"},
		"only an aim":                   {figure: "one_frame_bands_speedup", value: 1.6, says: "misses the aim: one_frame_bands_speedup is 1.6, want at least 1.7\n"},
		"no number":                     {figure: "heap_per_frame_fraction", value: math.NaN(), fails: true, says: "misses what is required: heap_per_frame_fraction is NaN"},
		"not measured":                  {figure: "line_search_vs_filter_bank", value: math.Inf(1), fails: true, says: "not measured: line_search_vs_filter_bank, want at least 60\n"},
		"not measured, nor asked for":   {figure: "line_search_vs_filter_bank", value: math.Inf(1), only: "fused"},
		"missed in a short run":         {figure: "fused_share_of_read_bound", value: 0.1, short: true, says: "misses what is required: fused_share_of_read_bound is 0.1"},
		"not measured in a short run":   {figure: "line_search_vs_filter_bank", value: math.Inf(1), short: true, says: "not measured: line_search_vs_filter_bank"},
		"missed in the only part asked": {figure: "two_frames_parallel_speedup", value: 1.5, only: "fused", fails: true, says: "two_frames_parallel_speedup is 1.5"},
	} {
		t.Run(name, func(t *testing.T) {
			all := reached()
			if math.IsInf(tc.value, 1) {
				delete(all, tc.figure)
			} else if tc.figure != "" {
				all[tc.figure] = figure{Value: tc.value}
			}
			measured := map[string]int{"fused": 3}
			if tc.only == "" {
				measured["verdicts"] = 3
			}
			var w strings.Builder
			err := report(&w, all, measured, options{short: tc.short, only: tc.only})
			if (err != nil) != tc.fails || tc.fails && !strings.Contains(err.Error(), tc.figure) {
				t.Errorf("error %v, want one: %v", err, tc.fails)
			}
			if !strings.Contains(w.String(), tc.says) {
				t.Errorf("said %q, want %q in it", w.String(), tc.says)
			}
		})
	}
}

// A part is measured up to three times, while a figure that it must reach is missed.
func TestThreeTries(t *testing.T) {
	for name, tc := range map[string]struct {
		values []float64 // of fused_vs_opencv_tuned_1t, one measurement after the other
		short  bool
		want   float64
		times  int
		fails  bool
	}{
		"at once":         {values: []float64{10}, want: 10, times: 1},
		"at the second":   {values: []float64{9, 11}, want: 11, times: 2},
		"at the third":    {values: []float64{9, 8, 10}, want: 10, times: 3},
		"never":           {values: []float64{9, 9.9, 8}, want: 9.9, times: 3, fails: true},
		"short, once":     {values: []float64{9}, short: true, want: 9, times: 1},
		"a number at all": {values: []float64{math.NaN(), 12}, want: 12, times: 2},
	} {
		t.Run(name, func(t *testing.T) {
			times := 0
			p := part{name: "fused", measure: func(options) (map[string]figure, error) {
				out := maps.Clone(reached())
				out["fused_vs_opencv_tuned_1t"] = figure{tc.values[times], ""}
				out["other"] = figure{float64(times), "ms"}
				times++
				return out, nil
			}}
			o := options{short: tc.short, only: "fused"}
			all, n, err := measure(p, o)
			if err != nil || n != tc.times || times != tc.times || all["fused_vs_opencv_tuned_1t"].Value != tc.want || all["other"].Value != 0 {
				t.Errorf("%v: %d times, %v, want %g after %d", err, n, all["fused_vs_opencv_tuned_1t"], tc.want, tc.times)
			}
			if err := report(io.Discard, all, map[string]int{"fused": n}, o); (err != nil) != tc.fails {
				t.Errorf("report: %v, want an error: %v", err, tc.fails)
			}
		})
	}
}

// The parts that goals name are those that there are.
func TestRunWritesAndReports(t *testing.T) {
	p := part{name: "verdicts", measure: func(options) (map[string]figure, error) {
		return map[string]figure{"grpc_to_verdict_over_fused": {4.1, ""}, "grpc_to_verdict_vs_opencv_tuned": {9, ""}}, nil
	}}
	out := filepath.Join(t.TempDir(), "sub", "bench.json")
	var w strings.Builder
	err := run(options{only: "verdicts"}, []part{p}, out, &w)
	if err == nil || !strings.Contains(err.Error(), "grpc_to_verdict_over_fused") || !strings.Contains(w.String(), "(best of 3)") {
		t.Errorf("%v, said %q", err, w.String())
	}
	if _, err := choose(parts(), options{only: "fused,nothing"}); err == nil {
		t.Error("a part that does not exist was chosen")
	}
	short, err := choose(parts(), options{short: true})
	if err != nil || len(short) < 2 {
		t.Errorf("a short run has %d parts: %v", len(short), err)
	}
}
