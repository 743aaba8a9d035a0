// Package random draws the numbers of every Monte Carlo and simulation here:
// one documented generator, cut into independent streams by seed, purpose and
// block, with full-resolution uniforms, normals and Student t whose tails are
// exact.
//
// A stream is made by New(seed, purpose, block). Work that is cut into blocks,
// one stream a block, gives the same numbers on any number of processors and in
// any order. Distribution shapes of metrology live in package gum; here are only
// the variates they are made of.
//
// The generator is xoshiro256++ (Blackman and Vigna 2021), seeded through the
// SplitMix64 finaliser (Steele, Lea and Flood 2014); it is not for cryptography.
// Normals and Student t come from 256-layer ziggurats (Marsaglia and Tsang 2000)
// with 55-bit abscissae whose bits are disjoint from those that choose the layer
// (Doornik 2005); the layers of the normal are a generated table that a test
// recomputes, those of Student t are laid out for each number of degrees of
// freedom when first asked for. Gamma follows Marsaglia and Tsang (2000b).
package random
