package main

import (
	"strings"
	"testing"

	"lapgate/configs"
)

func TestDemoPlanTakesTheMeasuredGate(t *testing.T) {
	text, err := configs.Demo.ReadFile("demo/volume.yaml")
	if err != nil {
		t.Fatal(err)
	}
	got, err := withMeasuredGate(text)
	if err != nil || !strings.Contains(string(got), "study: {file: gate_study.yaml") || strings.Contains(string(got), "miss: {count") {
		t.Errorf("%v; the plan still has invented errors of the gate, or no study", err)
	}
	if _, err := withMeasuredGate(got); err == nil {
		t.Error("a plan without the two lines was taken")
	}
}
