// Package protocol is the language between the console and a board: lines of
// printable ASCII, each closed by a CRC-16, and one control byte that cuts the
// drive. It encodes and decodes; it does not know ports, goroutines or the time
// of day. SPEC.md beside this file is the authority, and the vectors in
// testdata/vectors hold for any implementation of it.
//
// The pieces, in reading order: crc.go and line.go (what a line is), words.go
// (states, trip causes, refusals), telemetry.go (what a board reports at rate),
// framer.go (bytes to lines, in any chunks), identity.go (what a board says of
// itself), request.go and exchange.go (numbered requests and their answers).
package protocol
