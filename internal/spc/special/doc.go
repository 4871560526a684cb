// Package special holds the few special functions the statistics need, written
// on the standard library alone so that the packages of the fold can use them:
// the normal distribution with sound tails, the regularised incomplete gamma
// and beta functions with both complements, and point probabilities of the
// Poisson and binomial laws without cancellation.
//
// The functions here are the raw mathematics. They do not return errors: a
// caller checks its arguments first, and an argument outside the stated domain
// gives NaN. Package dist is the face with checked arguments.
package special
