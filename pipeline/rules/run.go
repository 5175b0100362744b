package rules

import (
	"fmt"
	"math"

	"cel.dev/cel-go/common/types"
	"cel.dev/cel-go/common/types/ref"
)

// Bool runs a program compiled for Truth.
func (p *Program) Bool(values Values) (bool, error) {
	v, err := p.eval(values, Truth)
	if err != nil {
		return false, err
	}
	return bool(v.(types.Bool)), nil
}

// Number runs a program compiled for Number; the result is finite.
func (p *Program) Number(values Values) (float64, error) {
	v, err := p.eval(values, Number)
	if err != nil {
		return 0, err
	}
	f := float64(v.(types.Double))
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return 0, fmt.Errorf("%s: the result is %v, not a finite number", p.text, f)
	}
	return f, nil
}

// TextOf runs a program compiled for Text.
func (p *Program) TextOf(values Values) (string, error) {
	v, err := p.eval(values, Text)
	if err != nil {
		return "", err
	}
	return string(v.(types.String)), nil
}

func (p *Program) eval(values Values, want Type) (ref.Val, error) {
	if p.want != want {
		panic(fmt.Sprintf("rules: %q was compiled for %s, not for %s", p.text, p.want, want))
	}
	v, _, err := p.run.Eval(activation{values, p.types})
	if err != nil {
		return nil, fmt.Errorf("%s: %w", p.text, err)
	}
	if got := plainType(v.Type().(*types.Type)); got != want.String() {
		return nil, fmt.Errorf("%s: gave %s, want %s", p.text, got, want)
	}
	return v, nil
}
