// Package rehearse is an instrument room on paper. It makes the exports of a
// laboratory (scans, pH tables, electrode calibrations, event logs, night
// plans) from a known truth, so that what the program says can be compared
// with what really happened. The demo, the tests and a laboratory's own
// validation use it.
//
// Its chemistry is computed on its own, from hydrogen ion activities and
// products of equilibrium constants; it shares no code with the rooms that
// analyse. Therefore it must not import pipeline/fit, pipeline/acidbase or
// pipeline/spectra, and a test checks that it does not.
//
// Everything is drawn from a seed: one night, or one set, can be made again
// without making the nights before it. Only disk.go touches a file system.
package rehearse
