// Package pipeline is the order of work: take a file in, assemble a set, judge
// it, chart references, open cases, tell people, write the brief. It is the
// only package that knows all the others except cmd.
package pipeline

// Version is the program version that every result names.
const Version = "0.1.0"
