// Command kymobench tests invasive blood-pressure transducers on the bench:
// static figures, step response, verdict, record and signed report.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
)

func main() {
	os.Exit(command(os.Args[1:], streams{in: os.Stdin, out: os.Stdout, err: os.Stderr}))
}

// command carries the command line out; a signal ends its context, and a second one the
// process.
func command(args []string, io streams) int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	context.AfterFunc(ctx, stop)
	root := newRootCommand(io)
	root.SetArgs(args)
	return report(root.ExecuteContext(ctx), args, io)
}
