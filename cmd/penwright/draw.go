package main

import (
	"bytes"
	"crypto/rand"
	"encoding/csv"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"

	"github.com/spf13/cobra"

	"penwright/analysis/prose"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/folder"
)

func (a *app) draw() *cobra.Command {
	var redraw, asJSON bool
	var why string
	var draws int
	c := &cobra.Command{
		Use:   "draw [TRIAL]",
		Short: "draws and records the allotment, once",
		Long: "draw allots the treatments to the units as the layout asks, from the seed text of the\n" +
			"protocol (or one made by the system, if it is empty), and writes allotment.csv and the\n" +
			"record allotment.toml. An allotment is never overwritten: --redraw keeps the old one\n" +
			"and notes the reason. --draws N --json prints N draws without recording any, the first\n" +
			"being what draw writes.",
		Example: "  penwright draw hollowmere\n  penwright draw hollowmere --draws 3 --json",
		Args:    one("TRIAL"),
		RunE: func(cmd *cobra.Command, args []string) error {
			many := cmd.Flags().Changed("draws")
			switch {
			case many != asJSON:
				return errors.New("--draws and --json go together")
			case many && (draws < 1 || draws > 1_000_000):
				return errors.New("--draws takes a number from 1 to 1000000")
			case many && redraw:
				return errors.New("--draws records nothing, so --redraw has no place beside it")
			case redraw && why == "":
				return errors.New("--redraw needs a reason: --why TEXT")
			case why != "" && !redraw:
				return errors.New("--why goes with --redraw")
			}
			if many {
				return a.printDraws(args, draws)
			}
			return a.record(args, redraw, why)
		},
	}
	c.Flags().BoolVar(&redraw, "redraw", false, "draw again, keeping the allotment there is")
	c.Flags().StringVar(&why, "why", "", "reason for drawing again")
	c.Flags().IntVar(&draws, "draws", 0, "print so many draws without recording them")
	c.Flags().BoolVar(&asJSON, "json", false, "as JSON: {\"columns\": […], \"draws\": [[row, …], …]}")
	return c
}

// forDrawing opens a trial whose data, if any, do not matter.
func (a *app) forDrawing(args []string) (*opened, error) {
	o, err := a.open(trialArg(args))
	if err != nil {
		return nil, err
	}
	if o.trial.Plan == nil {
		a.complain(o, o.list)
		o.close()
		return nil, status{code: findings}
	}
	return o, nil
}

func (a *app) printDraws(args []string, n int) error {
	o, err := a.forDrawing(args)
	if err != nil {
		return err
	}
	defer o.close()
	seed, err := seedOf(o.trial.Protocol)
	if err != nil {
		return failed(err)
	}
	if n*o.trial.Plan.Units[allot.RowUnit(o.trial.Plan)].N > 50_000_000 {
		return errors.New("so many draws of so many units are more than 50 million rows")
	}
	all, list := allot.Draws(o.trial.Plan, o.trial.Roster, seed, n)
	a.complain(o, list)
	if list.HasErrors() {
		return status{code: findings}
	}
	out := struct {
		Columns []string     `json:"columns"`
		Draws   [][][]string `json:"draws"`
	}{}
	for _, x := range all {
		// The rows of a draw are those that allotment.csv would have.
		records, err := csv.NewReader(bytes.NewReader(x.Bytes())).ReadAll()
		if err != nil {
			return failed(err)
		}
		out.Columns = records[0]
		out.Draws = append(out.Draws, records[1:])
	}
	if err := json.NewEncoder(a.out).Encode(out); err != nil {
		return failed(err)
	}
	return nil
}

// seedOf is the seed text of a protocol, or one made from the system's randomness.
func seedOf(p *protocol.Protocol) (string, error) {
	if p.Randomization.Seed != "" {
		return p.Randomization.Seed, nil
	}
	var b [16]byte
	if _, err := rand.Read(b[:]); err != nil {
		return "", err
	}
	return hex.EncodeToString(b[:]), nil
}

// record draws and writes the record.
func (a *app) record(args []string, redraw bool, why string) error {
	o, err := a.forDrawing(args)
	if err != nil {
		return err
	}
	defer o.close()
	t := o.trial
	has := false
	if _, err := fs.Stat(o.folder, allot.File); err == nil {
		has = true
	}
	if has && !redraw {
		return status{code: findings, err: fmt.Errorf("%s%s exists: the draw is made once and never overwritten (--redraw --why TEXT keeps it and draws again)", o.prefix(), allot.File)}
	}
	if redraw && !has {
		return status{code: findings, err: errors.New("there is no allotment yet to draw again; leave --redraw out")}
	}
	seed, err := seedOf(t.Protocol)
	if err != nil {
		return failed(err)
	}
	var record []allot.Draw
	if t.Allotment != nil {
		record = t.Allotment.Draws
	}
	// A second draw from the same seed text would be the first one again.
	seed = allot.Seed(record, seed)
	drawn, list := allot.New(t.Plan, t.Roster, seed)
	a.complain(o, list)
	if list.HasErrors() {
		return status{code: findings}
	}
	on := t.Protocol.Randomization.On
	if on.IsZero() || len(record) > 0 {
		now := a.now()
		on = protocol.Date{Year: now.Year(), Month: int(now.Month()), Day: now.Day()}
	}
	entry := allot.Draw{Seed: seed, By: t.Protocol.Randomization.By, On: on, Why: why, Plan: folder.Hash([]byte(t.Plan.String()))}
	if t.Roster != nil && t.Protocol.Roster != nil {
		if f, err := o.folder.Read(t.Protocol.Roster.File, folder.MaxFile); err == nil {
			entry.Roster = f.SHA256
		}
	}
	changes, err := allot.Changes(o.folder, drawn, entry)
	if err != nil {
		return status{code: findings, err: err}
	}
	switch err := o.folder.Apply(changes...); {
	case errors.Is(err, fs.ErrExist):
		return status{code: findings, err: fmt.Errorf("%w; a record is never overwritten: move it away first", err)}
	case err != nil:
		return failed(err)
	}
	for _, c := range changes {
		fmt.Fprintln(a.out, o.prefix()+c.Path)
	}
	for _, line := range prose.Arrangement(t.Plan, drawn) {
		a.say("%s", line)
	}
	return nil
}
