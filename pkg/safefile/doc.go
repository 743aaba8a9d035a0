// Package safefile replaces files so that a reader, a crash or a full disk
// never meets half of one: the new content is written to a temporary file in
// the same folder, flushed to the disk, and only then renamed over the old
// name. Until the rename the old file is whole; after it the new one is.
//
// A program that is ended by force between the two leaves its temporary file, a
// hidden one named .guardring-NUMBER.tmp, beside the old file. Nothing reads it;
// it may be deleted.
//
// It is the only package of guardring that replaces files.
package safefile
