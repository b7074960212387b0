// Package record reads and writes records of randomized measurements of a
// trial state, the "overlap-shots" format: one header, one entry per setting
// (a measurement basis with the outcomes seen in it), one end mark. There is a
// text form (JSON Lines) and a packed binary form with the same content;
// FORMAT.md beside this file is the page for those who write records.
//
// A Reader streams: it holds one setting at a time, whatever the length of the
// record, and validates everything that it hands out. A refusal is an *Error
// with a code, the place in the file and what was found.
//
// Conventions inside the package: qubit j is bit j of a word, whatever order
// the file prints its bit strings in; modes, qubits and Majorana operators
// count from zero in the record's own spin order. Majorana 2p is a_p + a†_p,
// Majorana 2p+1 is −i(a_p − a†_p).
package record
