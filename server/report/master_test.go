package report

import (
	"encoding/xml"
	"errors"
	"io"
	"strings"
	"testing"
	"time"
)

func TestDrawMaster(t *testing.T) {
	low := 190.0
	start := time.Date(2026, 3, 2, 6, 0, 0, 0, time.UTC)
	var list []MasterShowing
	for i, v := range []float64{212, 210, 209, 188} {
		list = append(list, MasterShowing{At: start.Add(time.Duration(i) * 8 * time.Hour), Value: &v, Low: &low, Result: []string{"pass", "pass", "void", "fail"}[i]})
	}
	list = append(list, MasterShowing{At: start.Add(40 * time.Hour), Low: &low, Result: "fail"})
	svg, err := DrawMaster("M-DIG-210 on line A, station A1", "diameter_um", list)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"M-DIG-210 on line A, station A1", "diameter_um", "pass", "fail", "void", "not found", "2026-03-02"} {
		if !strings.Contains(string(svg), want) {
			t.Errorf("the picture does not show %q", want)
		}
	}
	dec := xml.NewDecoder(strings.NewReader(string(svg)))
	for {
		if _, err := dec.Token(); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatalf("not XML: %v", err)
		}
	}
	if _, err := DrawMaster("M", "flux", nil); err == nil {
		t.Error("a chart of nothing")
	}
	if _, err := DrawMaster("M", "flux", []MasterShowing{{At: start, Result: "fail"}}); err != nil { // only one, and not found
		t.Error(err)
	}
}
