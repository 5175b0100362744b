package main

import (
	"fmt"
	"io"
)

func printShare(w io.Writer, what string, n, of int, i [2]float64) {
	fmt.Fprintf(w, "  %-16s  %4d  (%.2f to %.2f %% of %d)\n", what, n, 100*i[0], 100*i[1], of)
}

// printWhereToLook says what to try next.
func (d *demo) printWhereToLook() {
	server := d.server.address()
	calibrations, frames := "", ""
	for _, v := range d.scene.Views {
		calibrations += fmt.Sprintf(" --calibration %s=%s", v.Name, d.path("calibrations/"+v.Name))
		frames += fmt.Sprintf(" %s=%s", v.Name, d.path("frames/A/D000001_"+v.Name+".pgm"))
	}
	fmt.Fprintf(d.out, `
where to look next
  the files           %s: configs (scene, recipe, plan), frames, truth.jsonl, calibrations, verdicts, ledger.db
  the volume plan     %s: costs at every quantity, crossovers, all assumptions
  yield by process    %s yield --by process --server %s
  a unit's story      %s unit D000001 --server %s
  where defects lie   %s map --part %s --coordinates part --out map.html --server %s
  light, focus, scale %s drift --server %s
  tune a threshold    edit %s and save: the server takes it, or says why not
  one unit, drawn     build/lapgated inspect --recipe %s%s \
                       %s --overlay overlay.png

A verdict is not a certificate: acceptance follows the contract's drawing, standard and, where one is required, an accredited
laboratory. Bright LED and laser lighting can hurt eyes (IEC 62471, IEC 60825). The reject gate is not a safety device.
`, d.dir, d.path("plan.html"), d.client, server, d.client, server, d.client, d.scene.Part.Number, server, d.client, server,
		d.path("configs/demo/recipes/disc-25.yaml"), d.path("configs/demo/recipes/disc-25.yaml"), calibrations, frames)
}
