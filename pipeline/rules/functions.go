package rules

import (
	"math"

	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/env"
	"cel.dev/cel-go/common/operators"
	"cel.dev/cel-go/common/overloads"
	"cel.dev/cel-go/common/types"
	"cel.dev/cel-go/common/types/ref"
	"cel.dev/cel-go/common/types/traits"
)

// standard is the part of CEL's own library that expressions may use. Arithmetic is
// left out: the operators below replace it.
func standard() cel.EnvOption {
	keep := env.NewLibrarySubset().AddIncludedFunctions(
		env.NewFunction(operators.Conditional), env.NewFunction(operators.LogicalAnd),
		env.NewFunction(operators.LogicalOr), env.NewFunction(operators.LogicalNot),
		env.NewFunction(operators.NotStrictlyFalse),
		env.NewFunction(operators.Equals), env.NewFunction(operators.NotEquals),
		env.NewFunction(operators.Less, env.NewOverload(overloads.LessDouble, nil, nil)),
		env.NewFunction(operators.LessEquals, env.NewOverload(overloads.LessEqualsDouble, nil, nil)),
		env.NewFunction(operators.Greater, env.NewOverload(overloads.GreaterDouble, nil, nil)),
		env.NewFunction(operators.GreaterEquals, env.NewOverload(overloads.GreaterEqualsDouble, nil, nil)),
		env.NewFunction(operators.In), env.NewFunction(operators.Index),
		env.NewFunction(overloads.Contains), env.NewFunction(overloads.StartsWith), env.NewFunction(overloads.EndsWith),
	)
	return cel.StdLib(cel.StdLibSubset(keep))
}

// arithmetic declares + − * / on doubles, each refusing a result that is not finite,
// and + on texts and lists.
func arithmetic() []cel.EnvOption {
	d, list := cel.DoubleType, cel.ListType(cel.TypeParamType("A"))
	binary := func(op, id string, f func(a, b float64) float64) cel.EnvOption {
		return cel.Function(op, cel.Overload(id, []*cel.Type{d, d}, d, cel.BinaryBinding(checked(f))))
	}
	return []cel.EnvOption{
		binary(operators.Subtract, "finite_subtract", func(a, b float64) float64 { return a - b }),
		binary(operators.Multiply, "finite_multiply", func(a, b float64) float64 { return a * b }),
		binary(operators.Divide, "finite_divide", func(a, b float64) float64 { return a / b }),
		cel.Function(operators.Add,
			cel.Overload("finite_add", []*cel.Type{d, d}, d),
			cel.Overload("text_add", []*cel.Type{cel.StringType, cel.StringType}, cel.StringType),
			cel.Overload("list_add", []*cel.Type{list, list}, list),
			cel.SingletonBinaryBinding(add)),
		cel.Function(operators.Negate, cel.Overload("finite_negate", []*cel.Type{d}, d,
			cel.UnaryBinding(func(v ref.Val) ref.Val { return -v.(types.Double) }))),
	}
}

func add(a, b ref.Val) ref.Val {
	if x, ok := a.(types.Double); ok {
		return checked(func(a, b float64) float64 { return a + b })(x, b)
	}
	if adder, ok := a.(traits.Adder); ok {
		return adder.Add(b)
	}
	return types.MaybeNoSuchOverloadErr(a)
}

func checked(f func(a, b float64) float64) func(a, b ref.Val) ref.Val {
	return func(a, b ref.Val) ref.Val {
		x, okX := a.(types.Double)
		y, okY := b.(types.Double)
		if !okX || !okY {
			return types.MaybeNoSuchOverloadErr(b)
		}
		return finiteVal(f(float64(x), float64(y)))
	}
}

func finiteVal(f float64) ref.Val {
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return types.NewErr("a step of the calculation is not a finite number (division by zero, or too large)")
	}
	return types.Double(f)
}

// measures declares the functions over numbers and lists of numbers.
func measures() []cel.EnvOption {
	d, numbers := cel.DoubleType, cel.ListType(cel.DoubleType)
	any := cel.ListType(cel.TypeParamType("A"))
	one := func(name string, f func(float64) float64) cel.EnvOption {
		return cel.Function(name, cel.Overload(name+"_number", []*cel.Type{d}, d,
			cel.UnaryBinding(func(v ref.Val) ref.Val { return finiteVal(f(float64(v.(types.Double)))) })))
	}
	return []cel.EnvOption{
		one("abs", math.Abs), one("sqrt", math.Sqrt),
		cel.Function("count",
			cel.Overload("count_list", []*cel.Type{any}, d, cel.UnaryBinding(count)),
			cel.MemberOverload("list_count", []*cel.Type{any}, d, cel.UnaryBinding(count)),
			cel.Overload("count_text", []*cel.Type{cel.StringType}, d, cel.UnaryBinding(count)),
			cel.MemberOverload("text_count", []*cel.Type{cel.StringType}, d, cel.UnaryBinding(count))),
		cel.Function("sum", cel.Overload("sum_list", []*cel.Type{numbers}, d, cel.UnaryBinding(sum))),
		cel.Function("largest", cel.Overload("largest_list", []*cel.Type{numbers}, d, cel.UnaryBinding(largest))),
		extreme("max", math.Max, largest),
		extreme("min", math.Min, func(v ref.Val) ref.Val { return fold(v, math.Min, emptyMin) }),
	}
}

// extreme declares name(list), name(list, value of an empty list) and name(a, b).
func extreme(name string, f func(a, b float64) float64, ofList func(ref.Val) ref.Val) cel.EnvOption {
	d, numbers := cel.DoubleType, cel.ListType(cel.DoubleType)
	return cel.Function(name,
		cel.Overload(name+"_list", []*cel.Type{numbers}, d, cel.UnaryBinding(ofList)),
		cel.Overload(name+"_list_else", []*cel.Type{numbers, d}, d,
			cel.BinaryBinding(func(list, otherwise ref.Val) ref.Val { return fold(list, f, otherwise) })),
		cel.Overload(name+"_numbers", []*cel.Type{d, d}, d, cel.BinaryBinding(checked(f))))
}

var emptyMin = types.NewErr("min of an empty list has no value; write min(list, value when empty)")

func largest(v ref.Val) ref.Val { return fold(v, math.Max, types.Double(0)) }

func sum(v ref.Val) ref.Val {
	return fold(v, func(a, b float64) float64 { return a + b }, types.Double(0))
}

func count(v ref.Val) ref.Val {
	n, ok := v.(traits.Sizer).Size().(types.Int)
	if !ok {
		return types.MaybeNoSuchOverloadErr(v)
	}
	return types.Double(n)
}

// fold combines the elements of a list from left to right; an empty list gives empty.
func fold(v ref.Val, f func(a, b float64) float64, empty ref.Val) ref.Val {
	it := v.(traits.Lister).Iterator()
	if it.HasNext() != types.True {
		return empty
	}
	first, ok := it.Next().(types.Double)
	total := float64(first)
	for ok && it.HasNext() == types.True {
		var next types.Double
		if next, ok = it.Next().(types.Double); ok {
			total = f(total, float64(next))
		}
	}
	if !ok {
		return types.MaybeNoSuchOverloadErr(v)
	}
	return finiteVal(total)
}
