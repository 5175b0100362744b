package main

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/proto/inspectpb"
	"lapgate/server/yield"
)

// demoFigures is what the demo found. Judged counts only units whose worst defect lies
// outside ±10 % of every limit; a hold is neither right nor missed.
type demoFigures struct {
	Units           int                 `json:"units"`
	Verdicts        map[string]int      `json:"verdicts"`
	Lines           map[string]demoLine `json:"lines"`
	Judged          int                 `json:"judged_units"`
	NonConforming   int                 `json:"judged_nonconforming_units"`
	Conforming      int                 `json:"judged_conforming_units"`
	Agree           int                 `json:"agreeing_units"`
	Missed          int                 `json:"missed_units"`
	MissedInterval  [2]float64          `json:"missed_share_95"` // of the judged units, Clopper–Pearson
	FalselyRejected int                 `json:"falsely_rejected_units"`
	FalseInterval   [2]float64          `json:"falsely_rejected_share_95"`
	Held            int                 `json:"held_units"`
	HeldInterval    [2]float64          `json:"held_share_95"`
	FramesPerS      float64             `json:"frames_per_s"`
	wrong           []string            // units whose verdict disagrees
	gate            gateCounts
	pareto          []*inspectpb.ParetoRow
}

type demoLine struct {
	Units     int     `json:"units"`
	FirstPass float64 `json:"first_pass_yield"`
	Low       float64 `json:"low"`
	High      float64 `json:"high"`
}

// verdictLine is what feed prints of one unit.
type verdictLine struct {
	Unit    string `json:"unit"`
	Line    string `json:"line"`
	Verdict string `json:"verdict"`
}

func (d *demo) figures() (demoFigures, error) {
	f := demoFigures{Verdicts: map[string]int{"accept": 0, "reject": 0, "hold": 0}, Lines: map[string]demoLine{}}
	verdicts, err := d.verdicts()
	if err != nil {
		return f, err
	}
	truths, err := readLines[render.Truth](d.path("truth.jsonl"))
	if err != nil {
		return f, err
	}
	for _, t := range truths {
		verdict, ok := verdicts[t.Unit]
		if !ok {
			return f, fmt.Errorf("unit %s was fed and has no verdict", t.Unit)
		}
		f.count(t, pipeline.Verdict(verdict))
	}
	f.FramesPerS = float64(f.Units*len(d.scene.Views)) / d.took.Seconds()
	if err := f.intervals(); err != nil {
		return f, err
	}
	return f, d.askYield(&f)
}

func (d *demo) verdicts() (map[string]string, error) {
	names, err := filepath.Glob(d.path("verdicts/*.jsonl"))
	if err != nil {
		return nil, err
	}
	out := map[string]string{}
	for _, name := range names {
		lines, err := readLines[verdictLine](name)
		if err != nil {
			return nil, err
		}
		for _, l := range lines {
			out[l.Unit] = l.Verdict
		}
	}
	return out, nil
}

// readLines reads a file of JSON lines.
func readLines[T any](path string) ([]T, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	var out []T
	s := bufio.NewScanner(f)
	s.Buffer(nil, 16<<20)
	for s.Scan() {
		var v T
		if err := json.Unmarshal(s.Bytes(), &v); err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		out = append(out, v)
	}
	return out, s.Err()
}

func (f *demoFigures) count(t render.Truth, verdict pipeline.Verdict) {
	f.Units++
	f.Verdicts[string(verdict)]++
	f.gate.count(t.Conforming, verdict)
	if t.NearLimit {
		return
	}
	f.Judged++
	if t.Conforming {
		f.Conforming++
	} else {
		f.NonConforming++
	}
	switch {
	case verdict == pipeline.Hold:
		f.Held++
	case verdict == pipeline.Accept && !t.Conforming:
		f.Missed++
		f.wrong = append(f.wrong, t.Unit+" (missed)")
	case verdict == pipeline.Reject && t.Conforming:
		f.FalselyRejected++
		f.wrong = append(f.wrong, t.Unit+" (falsely rejected)")
	default:
		f.Agree++
	}
}

func (g *gateCounts) count(conforming bool, verdict pipeline.Verdict) {
	switch {
	case verdict == pipeline.Hold:
	case conforming:
		g.good++
		if verdict == pipeline.Reject {
			g.falselyRejected++
		}
	default:
		g.bad++
		if verdict == pipeline.Reject {
			g.found++
		}
	}
}

// dial opens a connection to the demo's server.
func (d *demo) dial() (*grpc.ClientConn, error) {
	return grpc.NewClient(d.server.address(), grpc.WithTransportCredentials(insecure.NewCredentials()))
}

// confidence of the demo's intervals.
const confidence = 0.95

func (f *demoFigures) intervals() error {
	for _, share := range []struct {
		n  int
		to *[2]float64
	}{{f.Missed, &f.MissedInterval}, {f.FalselyRejected, &f.FalseInterval}, {f.Held, &f.HeldInterval}} {
		i, err := yield.ClopperPearson(share.n, f.Judged, confidence)
		if err != nil {
			return err
		}
		*share.to = [2]float64{i.Low, i.High}
	}
	return nil
}

// askYield asks the server, over gRPC, for the yield of each line and the Pareto.
func (d *demo) askYield(f *demoFigures) error {
	conn, err := d.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	client := inspectpb.NewYieldServiceClient(conn)
	summary, err := client.GetSummary(context.Background(), &inspectpb.GetSummaryRequest{GroupBy: []string{"line"}})
	if err != nil {
		return err
	}
	for _, g := range summary.Groups {
		i := g.FirstPass.ClopperPearson
		f.Lines[g.Group["line"]] = demoLine{Units: int(g.Units), FirstPass: g.FirstPass.Value, Low: i.Low, High: i.High}
	}
	pareto, err := client.GetPareto(context.Background(), &inspectpb.GetParetoRequest{Most: 8})
	if err != nil {
		return err
	}
	f.pareto = pareto.Rows
	return nil
}

func writeJSON(path string, v any) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	if err := printJSON(f, v); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}

func (d *demo) print(f demoFigures) error {
	w := d.out
	fmt.Fprintf(w, "\n%d units: %d accepted, %d rejected, %d held; %.1f frames per second from feed to verdict\n",
		f.Units, f.Verdicts["accept"], f.Verdicts["reject"], f.Verdicts["hold"], f.FramesPerS)
	fmt.Fprintln(w, "\nfirst-pass yield, with the 95 % Clopper–Pearson interval")
	var names []string
	for name := range f.Lines {
		names = append(names, name)
	}
	slices.Sort(names)
	for _, name := range names {
		l := f.Lines[name]
		fmt.Fprintf(w, "  line %s  %5.1f %%  (%.1f to %.1f %%) of %d units\n", name, 100*l.FirstPass, 100*l.Low, 100*l.High, l.Units)
	}
	fmt.Fprintln(w, "\nreasons, by how often each came first")
	for _, r := range f.pareto {
		fmt.Fprintf(w, "  %-24s %4d  %5.1f %%\n", r.Reason, r.First, 100*r.Share)
	}
	fmt.Fprintf(w, "\nagainst the truth that the frames were drawn from (%d of %d units: worst defect outside ±10 %% of every limit)\n", f.Judged, f.Units)
	fmt.Fprintf(w, "  agree             %4d\n", f.Agree)
	printShare(w, "missed", f.Missed, f.Judged, f.MissedInterval)
	printShare(w, "falsely rejected", f.FalselyRejected, f.Judged, f.FalseInterval)
	printShare(w, "held", f.Held, f.Judged, f.HeldInterval)
	for _, u := range f.wrong {
		fmt.Fprintf(w, "    %s\n", u)
	}
	err := d.plan(f)
	if err != nil && d.units > 0 { // fewer units than the scene has may leave a process out
		fmt.Fprintf(w, "\nno volume plan from so few units: %v\n", err)
		err = nil
	}
	d.printWhereToLook()
	return err
}
