// Package formula compiles formulas written as Go expressions, checks their
// dimensions, evaluates them in blocks of rows and differentiates them exactly.
//
//	Compile    text and names of variables → Program
//	Names      which variables a text names
//	Program    Dimension, LinearIn, Eval; does not change, safe to share
//	Workspace  Block, BlockGradient, Gradient, Hessian; one for each goroutine
//
// # Language
//
// Names of variables, decimal numbers, + - * /, parentheses; the functions
//
//	sqrt pow exp log sin cos tan asin acos atan atan2 sinh cosh tanh abs min max
//
// (log is the natural logarithm, angles are in radians, atan2 takes y before x,
// min and max take two arguments or more) and the constants
//
//	pi eps0 qe ke g0
//
// with their SI values of package si. Precedence is that of Go and of
// arithmetic. Every number is a float64, so that 1/2 is 0.5. There is no
// operator for powers: write pow(x, 2). Formulas are bounded to 4096 bytes, 64
// levels of nesting and 1024 variables. Errors are *Error and tell the column.
//
// # Evaluation
//
// A formula becomes a list of operations in which constants are folded and
// every common subexpression stands once. pow with a small whole exponent
// becomes multiplications, with 1/2 a square root. A block of rows at a time
// goes through the list, so that intermediate results stay in the cache; what
// depends only on variables that are the same in all rows is computed once.
// Eval, Block, Gradient, BlockGradient and Hessian give the same bits for the
// same arguments, for any number of rows.
//
// # Derivatives
//
// Derivatives are built from the list by reverse accumulation, with the
// elementary derivatives of each operation, and compiled into a list of their
// own that shares what value and derivatives have in common. Second derivatives
// are the derivatives of the first. They are exact but for the rounding of the
// operations. At the kinks the derivative of one side is taken: abs counts as
// rising at 0; of equal arguments of min and max the first counts. Where an
// argument that min or max leaves out has an infinite derivative, the result
// is NaN.
//
// The derivative of a^b by b is a^b log a, with the limit 0 at a = 0, b > 0;
// that of tanh is computed as 1/cosh², without cancellation.
package formula
