// Pkvigil watches the export folders of a laboratory that measures acid
// dissociation constants by UV-visible spectrophotometry, computes and judges
// every sample set, and tells when a reference indicator drifts.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
	_ "time/tzdata" // zones are named in the settings, also on machines without a zone database
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	code := run(ctx, os.Args[1:], os.Stdout, os.Stderr)
	stop()
	os.Exit(code)
}
