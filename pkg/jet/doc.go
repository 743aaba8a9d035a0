// Package jet carries exact first and second derivatives through a
// calculation, forwards, beside its value.
//
// A Jet is a number with its gradient with respect to n seeds and the rows of
// its Hessian that belong to the first p of them. The partial Hessian is closed
// under the rules of differentiation (an entry (i, j) needs only the gradients
// and the entries (i, j) of its operands), so a reduction that fits p
// parameters and carries n − p shared inputs pays for p·n second derivatives
// and not for n². With p = 0 only gradients are carried.
//
// A jet made by Const, or by arithmetic on constants alone, has no derivative
// part and costs no more than a float64. Derivatives are the chain rule applied
// to each elementary operation (derived; see any text on forward accumulation),
// so they are exact to rounding: nothing is differenced.
//
// Jets live in a Space, which hands out their storage and takes all of it back
// at Reset. A Space belongs to one goroutine.
package jet
