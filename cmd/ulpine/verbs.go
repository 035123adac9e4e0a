package main

import "github.com/spf13/cobra"

// verbs lists the subcommands: one file a verb.
func verbs() []*cobra.Command {
	return []*cobra.Command{
		newRun(), newResolve(), newList(), newShow(), newVerdicts(), newReport(),
		newNumber(), newRound(), newMatmul(), newSum(), newVectors(), newSelftest(),
		newCost(),
	}
}
