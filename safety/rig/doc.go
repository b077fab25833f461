// Package rig reads and writes the rig file: what one rig is, how it is wired,
// and the limits within which it may be moved. Parse takes bytes and gives a
// complete Rig or every error with its line and column; Rig.Envelope is what the
// console limiter works with. README.md describes every key; it is made from the
// same table (keys.go) as the checks.
//
// The package opens no files.
package rig
