package main

import (
	"context"
	"errors"
	"os"
	"path/filepath"

	"lapgate/configs"
	"lapgate/server/volume/plan"
)

// load reads the plan with everything it names. Mistakes come with
// file:line:column.
func (j *volumeJob) load(ctx context.Context) (*plan.Plan, error) {
	p, source, err := configs.Load[plan.Plan](j.file)
	if err != nil {
		return nil, err
	}
	p.Format = plan.Format // configs refuses any other
	if err := p.Validate(); err != nil {
		return nil, placed(source, err)
	}
	beside := func(file string) string { return filepath.Join(filepath.Dir(j.file), file) }
	err = errors.Join(
		p.ResolveStudies(func(file string) (*plan.Study, error) { return loadStudy(beside(file)) }),
		p.ResolveThreshold(func(file string) ([]plan.ThresholdRow, error) { return loadThresholds(beside(file)) }))
	if err != nil {
		return nil, placed(source, err)
	}
	return &p, j.resolveLedger(ctx, &p, source)
}

// placed gives problems of a plan their line and column.
func placed(source configs.Source, err error) error {
	var all configs.Problems
	for _, problem := range plan.Problems(err) {
		all = append(all, source.Problem(problem.Path, problem.Message, ""))
	}
	if all == nil {
		return err
	}
	return &volumeInputError{all}
}

func loadStudy(path string) (*plan.Study, error) {
	s, source, err := configs.Load[plan.Study](path)
	if err != nil {
		return nil, err
	}
	s.Format = plan.Format
	if err := s.Validate(); err != nil {
		return nil, placed(source, err)
	}
	return &s, nil
}

func loadThresholds(path string) ([]plan.ThresholdRow, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return plan.ReadThresholds(f)
}

// resolveLedger takes counts from the file, if one is given, else from the
// server. A server that cannot be reached is a failure, not a mistake.
func (j *volumeJob) resolveLedger(ctx context.Context, p *plan.Plan, source configs.Source) error {
	if j.counts == "" {
		var failed error
		err := p.ResolveLedger(func(f plan.LedgerFilter) (plan.Counts, error) {
			counts, err := askLedger(ctx, j.server, f)
			failed = errors.Join(failed, err)
			return counts, err
		})
		if failed != nil {
			return failed
		}
		return placedOrNil(source, err)
	}
	file, _, err := configs.Load[plan.CountsFile](j.counts)
	if err != nil {
		return err
	}
	return placedOrNil(source, p.ResolveLedger(file.Find))
}

func placedOrNil(source configs.Source, err error) error {
	if err == nil {
		return nil
	}
	return placed(source, err)
}
