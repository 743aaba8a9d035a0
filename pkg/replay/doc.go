// Package replay runs a notebook or a recorded result again and says where, if
// anywhere, the numbers differ; and it packs what another laboratory needs to do
// the same into one file, and opens such a file safely.
//
// # Notebooks
//
// RunNotebook runs the code cells of a notebook (nbformat 4, up to 4.5) from a
// fresh kernel in the notebook's folder, without Python, and compares each output
// with the stored one: the result record (lab.ResultMIME) number by number, the
// plain text number by number and word by word, drawings by their coordinates. The
// other forms of an output say the same again; they are looked at when the record
// and the text agree. Versions of the tool, of Go and of modules may differ; they
// become notes.
//
// # Tolerance
//
// Two numbers agree when |b − a| ≤ t · max(|a|, |b|, u), where t is the tolerance
// and u the standard uncertainty of the number, if the record or the printed form
// 8.8542(31) states one. Elements of a covariance count against √(vᵢᵢ vⱼⱼ), a
// correlation against 1: numbers that are zero but for rounding have no relative
// difference. The differences are given in units of u.
//
// # Records
//
// RunRecord does a recorded reduction, fit or propagation again from the inputs,
// options, seed and trials that the record names. Inputs stand relative to the
// record; one that is missing or changed is named with its SHA-256.
//
// # Packs
//
// Pack writes a zip with the files, a SHA256SUMS in the form that sha256sum -c
// reads, ro-crate-metadata.json (RO-Crate Metadata Specification 1.1,
// https://w3id.org/ro/crate/1.1) and datapackage.json (Data Package, Data
// Resource, Tabular Data Resource and Table Schema, version 1,
// https://specs.frictionlessdata.io) with units as UCUM codes. The same files with
// the same dates give the same bytes. Unpack reads a pack into a folder that it
// may fill, verifies every checksum, and refuses names that lead elsewhere, links,
// duplicates and archives that blow up.
package replay
