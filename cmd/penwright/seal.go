package main

import (
	"errors"
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"penwright/analysis/dataset"
	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/seal"
)

func (a *app) seal() *cobra.Command {
	var by, on string
	c := &cobra.Command{
		Use:   "seal [TRIAL]",
		Short: "freezes the plan before the data",
		Long: "seal writes the whole plan into seal.toml, with the fingerprints of plan, roster and\n" +
			"allotment. From then on a change of the plan needs an [[amendment]], dated on the day\n" +
			"of the seal or later, whose text names what changed; check reports what has none, and\n" +
			"the report marks what was not planned before the data. A second seal is added below\n" +
			"the first and says what changed; none is ever overwritten.",
		Example: "  penwright seal hollowmere --by \"Ansa Verrill\"",
		Args:    one("TRIAL"),
		RunE: func(_ *cobra.Command, args []string) error {
			day, err := a.day(on)
			if err != nil {
				return err
			}
			o, err := a.open(trialArg(args))
			if err != nil {
				return err
			}
			defer o.close()
			said, bad := beforeData(o.list)
			a.complain(o, said)
			if bad || o.trial.Plan == nil {
				return status{code: findings}
			}
			return a.sealed(o, by, day)
		},
	}
	c.Flags().StringVar(&by, "by", "", "who seals")
	c.Flags().StringVar(&on, "on", "", "day of the seal, such as 2026-02-20 (default: today)")
	return c
}

// day is the day that a flag gives, or today.
func (a *app) day(flag string) (protocol.Date, error) {
	day := a.now()
	if flag != "" {
		var err error
		if day, err = time.Parse(time.DateOnly, flag); err != nil {
			return protocol.Date{}, fmt.Errorf("--on %s is no day; write year-month-day, such as 2026-02-20", flag)
		}
	}
	return protocol.Date{Year: day.Year(), Month: int(day.Month()), Day: day.Day()}, nil
}

// beforeData leaves out that data are named which are not there yet, as they should not
// be when a plan is sealed, and tells whether an error is left.
func beforeData(list diag.List) (diag.List, bool) {
	var out diag.List
	for _, d := range list {
		if d.Code != protocol.Unreadable || !strings.HasPrefix(d.Key, "data.") {
			out = append(out, d)
		}
	}
	return out, out.HasErrors()
}

func (a *app) sealed(o *opened, by string, on protocol.Date) error {
	t := o.trial
	data, err := o.data()
	if err != nil {
		return failed(err)
	}
	changes, err := seal.Changes(o.folder, t.Protocol, seal.Entry{By: by, On: on, Data: data})
	if errors.Is(err, seal.ErrSame) {
		a.say("%v; nothing was written", err)
		return nil
	}
	if err != nil {
		return status{code: findings, err: err}
	}
	var since []seal.Difference
	if t.Seal != nil {
		for _, r := range t.Seal.Revisions {
			if r.Since == t.Seal.Last().Number {
				since = append(since, r.Difference)
			}
		}
	}
	if err := o.folder.Apply(changes...); err != nil {
		return failed(err)
	}
	fmt.Fprintln(a.out, o.prefix()+seal.File)
	for i := range since {
		fmt.Fprintln(a.out, since[i].String())
	}
	if data != "" {
		a.say("there are data already: this seal does not show what was planned before them")
	}
	if by == "" {
		a.say("the seal does not say by whom it was made; next time add --by NAME")
	}
	return nil
}

// data is the fingerprint of the data file if it holds any value, else empty. A sheet
// that waits to be filled holds none.
func (o *opened) data() (string, error) {
	t := o.trial
	if t.Table == nil || t.Protocol.Data == nil {
		return "", nil
	}
	for i := range t.Table.Responses {
		for _, s := range t.Table.Responses[i].Status {
			if s != dataset.Missing {
				f, err := o.folder.Read(t.Protocol.Data.File, folder.MaxFile)
				return f.SHA256, err
			}
		}
	}
	return "", nil
}
