package main

import (
	"errors"

	"github.com/spf13/cobra"

	"penwright/analysis"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/render"
	"penwright/render/term"
)

func (a *app) size() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:   "size [TRIAL]",
		Short: "tells what the number of units buys: power, detectable difference, replication",
		Long: "size computes from the plan and [sample_size] the power, the difference that can be\n" +
			"detected, the half width of intervals, the replication that would do, and how these\n" +
			"change with replication, difference and spread; --json prints the same in full precision.",
		Example: "  penwright size hollowmere\n  penwright size hollowmere --json",
		Args:    one("TRIAL"),
		RunE: func(_ *cobra.Command, args []string) error {
			o, err := a.open(trialArg(args))
			if err != nil {
				return err
			}
			defer o.close()
			if o.trial.Plan == nil {
				a.complain(o, o.list)
				if !o.list.HasErrors() {
					return failed(errors.New("the trial has no plan although nothing was found wrong"))
				}
				return status{code: findings}
			}
			s, list := analysis.Size(o.trial)
			// Faults of the data do not bear on the size; those of the plan do.
			a.complain(o, append(planned(o.list), list...))
			if asJSON {
				err = result.WriteSize(a.out, s)
			} else {
				err = term.Write(a.out, render.Size(o.trial, s, a.width), term.Options{Width: a.width})
			}
			if err != nil {
				return failed(err)
			}
			return nil
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the sample_size object of results.json")
	return c
}

// planned keeps the findings on the protocol.
func planned(list diag.List) diag.List {
	var out diag.List
	for _, d := range list {
		if d.Pos.File == trial.ProtocolFile {
			out = append(out, d)
		}
	}
	return out
}
