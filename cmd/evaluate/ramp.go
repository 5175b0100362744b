package main

import (
	"encoding/csv"
	"os"
	"path/filepath"
	"strconv"

	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/raster"
)

// addRamp adds K, quantum efficiency and the number of levels fitted to out.
func addRamp(out map[string]any, dir string) error {
	photons, bright, dark, err := readRamp(dir)
	if err != nil {
		return err
	}
	peak := 0
	for i, l := range bright {
		if l.VarianceDN2 > bright[peak].VarianceDN2 {
			peak = i
		}
	}
	limit := 0.7 * (bright[peak].MeanDN - dark[peak].MeanDN)
	n := 0
	for n < len(bright) && bright[n].MeanDN-dark[n].MeanDN <= limit {
		n++
	}
	gain, err := calibrate.SystemGain(bright[:n], dark[:n])
	if err != nil {
		return err
	}
	var xy, xx float64
	for i := range n {
		xy += photons[i] * (bright[i].MeanDN - dark[i].MeanDN)
		xx += photons[i] * photons[i]
	}
	out["gain_ramp_dn_per_e"], out["quantum_efficiency"], out["ramp_levels"] = gain, xy/xx/gain, n
	return nil
}

// readRamp reads ramp.csv and the pairs of frames it names.
func readRamp(dir string) (photons []float64, bright, dark []calibrate.Level, err error) {
	f, err := os.Open(filepath.Join(dir, "ramp.csv"))
	if err != nil {
		return nil, nil, nil, err
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		return nil, nil, nil, err
	}
	for _, row := range rows[1:] {
		p, err := strconv.ParseFloat(row[1], 64)
		if err != nil {
			return nil, nil, nil, err
		}
		b, err := readPair(dir, row[2], row[3])
		if err != nil {
			return nil, nil, nil, err
		}
		d, err := readPair(dir, row[4], row[5])
		if err != nil {
			return nil, nil, nil, err
		}
		photons, bright, dark = append(photons, p), append(bright, b), append(dark, d)
	}
	return photons, bright, dark, nil
}

func readPair(dir, a, b string) (calibrate.Level, error) {
	fa, err := readFrame12(filepath.Join(dir, a))
	if err != nil {
		return calibrate.Level{}, err
	}
	fb, err := readFrame12(filepath.Join(dir, b))
	if err != nil {
		return calibrate.Level{}, err
	}
	return pairLevel(fa.Raw, fb.Raw)
}

func pairLevel(a, b raster.Raw) (calibrate.Level, error) {
	ca, err := a.Counts()
	if err != nil {
		return calibrate.Level{}, err
	}
	cb, err := b.Counts()
	if err != nil {
		return calibrate.Level{}, err
	}
	return calibrate.Pair(ca, cb), nil
}
