package rules

import (
	"cel.dev/cel-go/common/ast"
	"cel.dev/cel-go/common/operators"
	"cel.dev/cel-go/common/types"
)

// promote makes every number of a parsed expression a double: integer literals become
// double literals (an index such as xs[0] stays whole), and size, which gives an
// integer, becomes count, which gives a double. Positions stay what they were. Maps and
// struct values are refused.
func promote(tree *ast.AST) error {
	var refused SyntaxErrors
	indices := map[int64]bool{}
	factory := ast.NewExprFactory()
	ast.PreOrderVisit(tree.Expr(), ast.NewExprVisitor(func(e ast.Expr) {
		switch e.Kind() {
		case ast.CallKind:
			promoteCall(factory, e, indices)
		case ast.StructKind, ast.MapKind:
			at := tree.SourceInfo().GetStartLocation(e.ID())
			refused = append(refused, SyntaxError{at.Line(), at.Column() + 1, "braces make a value that nothing here can use"})
		case ast.LiteralKind:
			if n, ok := e.AsLiteral().(types.Int); ok && !indices[e.ID()] {
				e.SetKindCase(factory.NewLiteral(e.ID(), types.Double(n)))
			}
		}
	}))
	if refused != nil {
		return refused
	}
	return nil
}

func promoteCall(factory ast.ExprFactory, e ast.Expr, indices map[int64]bool) {
	call := e.AsCall()
	switch call.FunctionName() {
	case operators.Index:
		indices[call.Args()[1].ID()] = true
	case "size":
		if call.IsMemberFunction() {
			e.SetKindCase(factory.NewMemberCall(e.ID(), "count", call.Target(), call.Args()...))
		} else {
			e.SetKindCase(factory.NewCall(e.ID(), "count", call.Args()...))
		}
	}
}
