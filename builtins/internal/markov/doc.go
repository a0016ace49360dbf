// Package markov has the algorithms on finite Markov chains that the exact figures of codes rest on: closed classes and
// the probabilities of ending in each, periods with their cyclic classes, and stationary distributions.
//
// A chain is a sparse [Graph] whose edges carry probabilities; only its structure with probability above zero counts.
// Linear systems are solved by eliminating states one by one, in an order that keeps the fill small, and without a
// subtraction anywhere, so that even very small probabilities keep nearly all their digits (Grassmann, Taksar and
// Heyman, "Regenerative analysis and steady state distributions for Markov chains", Operations Research 33 (1985)
// 1107-1116). Chains that elimination would fill, such as shift registers of many states, mix fast; they are solved by
// iteration to a stated error. A chain that is neither is refused with its size.
package markov
