// Package jcamp reads JCAMP-DX files.
package jcamp

import "pkvigil/parse"

// Read refuses: this build reads no JCAMP-DX.
func Read(name string, data []byte, opt parse.Options) (*parse.Content, error) {
	return nil, &parse.Error{File: name, Found: "a JCAMP-DX file", Expected: "delimited text", Remedy: "export the scan as text"}
}
