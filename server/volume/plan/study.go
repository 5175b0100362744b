package plan

import (
	"errors"
	"fmt"
	"slices"
)

// Study is the study file: how often an inspection finds a defect of each
// size, and how often it calls a conforming unit.
type Study struct {
	Format      int           `yaml:"format"`
	Name        string        `yaml:"name"`
	Note        string        `yaml:"note"`
	Sensitivity []Sensitivity `yaml:"sensitivity"`
	FalseCalls  FalseCalls    `yaml:"false_calls"`
}

// Sensitivity is one size: how many units with a worst defect of this size
// were found of those shown. Repeats of one unit are not independent: count
// units.
type Sensitivity struct {
	SizeUm float64 `yaml:"size_um"`
	Found  int     `yaml:"found"`
	Shown  int     `yaml:"shown"`
}

// FalseCalls are conforming units that were called nonconforming.
type FalseCalls struct {
	Called int `yaml:"called"`
	Shown  int `yaml:"shown"`
}

// StudyRef takes misses and false rejects from a study. The sizes are those
// of production, whose mix differs from the study's: shares of nonconforming
// units by size of their worst defect, adding up to 1.
type StudyRef struct {
	File        string      `yaml:"file"` // beside the plan
	DefectSizes []SizeShare `yaml:"defect_sizes"`
	Resolved    *Study      `yaml:"-"`
}

// SizeShare is the share of nonconforming production units of one size.
type SizeShare struct {
	SizeUm float64 `yaml:"size_um"`
	Share  float64 `yaml:"share"`
}

// Validate checks a study by itself.
func (s *Study) Validate() error {
	var c checks
	c.want(s.Format == Format, "format", "found %d; allowed: %d", s.Format, Format)
	c.want(len(s.Sensitivity) > 0, "sensitivity", "is empty; at least one size is needed")
	for i, row := range s.Sensitivity {
		at := fmt.Sprintf("sensitivity[%d]", i)
		c.positive(at+".size_um", row.SizeUm)
		c.count(at, Count{row.Found, row.Shown})
	}
	c.count("false_calls", Count{s.FalseCalls.Called, s.FalseCalls.Shown})
	return c.err()
}

// miss is the chance of a miss over the production mix of sizes: each size's
// share times its own Beta.
func (r *StudyRef) miss() (Belief, error) {
	var b Belief
	for _, size := range r.DefectSizes {
		i := slices.IndexFunc(r.Resolved.Sensitivity, func(s Sensitivity) bool { return s.SizeUm == size.SizeUm })
		if i < 0 {
			return Belief{}, fmt.Errorf("study %q has no size %v um", r.Resolved.Name, size.SizeUm)
		}
		s := r.Resolved.Sensitivity[i]
		b.parts = append(b.parts, part{size.Share, FromCount(Count{s.Shown - s.Found, s.Shown})})
	}
	return b, nil
}

// ResolveStudies fills every study reference by read, which is given the file
// name as the plan has it, and checks what comes back.
func (p *Plan) ResolveStudies(read func(file string) (*Study, error)) error {
	var errs []error
	for i := range p.Inspections {
		ref := p.Inspections[i].Study
		if ref == nil {
			continue
		}
		at := fmt.Sprintf("inspections[%d].study", i)
		if err := ref.resolve(read); err != nil {
			errs = append(errs, &Problem{at + ".file", fmt.Sprintf("study %q: %v", ref.File, err)})
			continue
		}
		if _, err := ref.miss(); err != nil {
			errs = append(errs, &Problem{at + ".defect_sizes", err.Error()})
		}
	}
	return errors.Join(errs...)
}

func (r *StudyRef) resolve(read func(file string) (*Study, error)) error {
	study, err := read(r.File)
	if err != nil {
		return err
	}
	if err := study.Validate(); err != nil {
		return err
	}
	r.Resolved = study
	return nil
}
