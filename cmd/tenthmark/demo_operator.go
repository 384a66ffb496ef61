package main

import (
	"context"
	"fmt"
	"io"
	"time"

	"tenthmark/session"
)

// virtualOperator is a person at the bench: it knows the burette, the vessel and
// the balance with its hands, and the daemon by its API alone.
type virtualOperator struct {
	api      *client
	reviewer *client
	bench    *demoBench
	out      io.Writer
	run      string
	misread  int // delivery at which the operator misreads by one line
	spill    int // delivery at which water goes beside the vessel
	slipped  bool
	// afterStep, if there is one, is called after everything the operator does.
	afterStep func()
	spilt     bool
}

// runView is what the operator looks at of a run.
type runView struct {
	Run struct {
		ID, State string
	}
	Deliveries []session.DocumentDelivery
	Awaits     []session.Awaited
	Prompt     string
	Doubt      *session.Doubt
	Seen       []session.DocumentSeen
}

func (v *runView) delivery(number int) session.DocumentDelivery { return v.Deliveries[number-1] }

// register puts the burette into the register.
func (o *virtualOperator) register(ctx context.Context) error {
	burette := map[string]any{
		"burette": "B-07", "capacity_mL": 50, "subdivision_mL": "0.1", "class": "AS", "material": "borosilicate-3.3",
		"reference_temp_C": 20, "serial_number": "07-2219", "maker": "Example Glass", "stopcock": "PTFE", "wait_s": 30,
		"interval_months": 12, "location": "Titration bench, total hardness",
	}
	if err := o.api.call(ctx, "POST", "/api/v1/burettes", burette, nil); err != nil {
		return fmt.Errorf("register burette: %w", err)
	}
	return nil
}

// waitForBalance looks at the station until its line is open.
func (o *virtualOperator) waitForBalance(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(ctx, 30*time.Second)
	defer cancel()
	for {
		var health struct {
			Stations []struct{ Name, State string }
		}
		if err := o.api.call(ctx, "GET", "/api/v1/health", nil, &health); err != nil {
			return fmt.Errorf("waiting for the balance: %w", err)
		}
		if len(health.Stations) > 0 && health.Stations[0].State == "online" {
			return nil
		}
		select {
		case <-time.After(20 * time.Millisecond):
		case <-ctx.Done():
			return fmt.Errorf("waiting for the balance: %w", ctx.Err())
		}
	}
}

// calibrate does the whole run, from opening to the reviewer's signature.
func (o *virtualOperator) calibrate(ctx context.Context, open map[string]any) error {
	if err := o.waitForBalance(ctx); err != nil {
		return err
	}
	var view runView
	if err := o.api.call(ctx, "POST", "/api/v1/runs", open, &view); err != nil {
		return fmt.Errorf("open run: %w", err)
	}
	o.run = view.Run.ID
	fmt.Fprintf(o.out, "run %s is open\n", o.run)
	o.pause()
	for {
		view, err := o.look(ctx)
		if err != nil {
			return err
		}
		if len(view.Awaits) == 0 {
			break
		}
		if err := o.act(ctx, view); err != nil {
			return fmt.Errorf("%s: %w", view.Prompt, err)
		}
	}
	return o.sign(ctx)
}

func (o *virtualOperator) path(more string) string { return "/api/v1/runs/" + o.run + more }

func (o *virtualOperator) look(ctx context.Context) (*runView, error) {
	view := &runView{}
	return view, o.api.call(ctx, "GET", o.path(""), nil, view)
}

// act does what the daemon waits for first.
func (o *virtualOperator) act(ctx context.Context, view *runView) error {
	next := view.Awaits[0]
	switch {
	case next.Fact == "answer":
		return o.mend(ctx, view)
	case next.Fact == "reading" && next.Role == session.Start:
		shown := o.bench.Refill(view.delivery(next.Delivery).FromML)
		return o.enter(ctx, map[string]string{"reading": shown})
	case next.Fact == "weighing" && next.Role == session.Before:
		o.bench.EmptyVessel()
		return o.weigh(ctx, next)
	case next.Fact == "weighing":
		return o.deliver(ctx, view.delivery(next.Delivery))
	}
	return fmt.Errorf("the operator does not know what to do about %q", next.Fact)
}

// deliver lets water into the vessel, weighs it, and enters what is to be read.
func (o *virtualOperator) deliver(ctx context.Context, d session.DocumentDelivery) error {
	reading := o.bench.DeliverTo(d.PointML)
	if d.Delivery == o.spill && !o.spilt {
		o.spilt = true
		o.bench.Spill(0.12)
		fmt.Fprintln(o.out, "      some water goes beside the vessel")
	}
	if d.Delivery == o.misread && !o.slipped {
		o.slipped = true
		reading = o.bench.Misread(1)
		fmt.Fprintf(o.out, "      the meniscus is misread by one line: %s mL\n", reading)
	}
	if err := o.weigh(ctx, session.Awaited{Delivery: d.Delivery, Role: session.After}); err != nil {
		return err
	}
	if err := o.enter(ctx, map[string]string{"reading": reading, "water_temp_C": o.bench.WaterTemp()}); err != nil {
		return err
	}
	return o.report(ctx, d.Delivery)
}

// report prints a finished delivery's line.
func (o *virtualOperator) report(ctx context.Context, number int) error {
	view, err := o.look(ctx)
	if err != nil {
		return err
	}
	d := view.delivery(number)
	if d.DocumentNumbers == nil {
		return fmt.Errorf("delivery %d is not complete after all", number)
	}
	fmt.Fprintf(o.out, "  %2d  %6s → %6s mL   %9.4f g   %s °C   correction %+.4f mL\n", number,
		d.Start.ReadingML, d.End.ReadingML, d.NetMassG, d.Water.WaterTempC, d.CorrectionML)
	return nil
}

func (o *virtualOperator) enter(ctx context.Context, facts map[string]string) error {
	return o.order(ctx, o.api, "/facts", facts)
}

// order asks for something to happen in the run.
func (o *virtualOperator) order(ctx context.Context, api *client, what string, in any) error {
	if err := api.call(ctx, "POST", o.path(what), in, nil); err != nil {
		return err
	}
	o.pause()
	return nil
}

func (o *virtualOperator) pause() {
	if o.afterStep != nil {
		o.afterStep()
	}
}

// weigh puts the vessel on the pan, waits until the daemon has taken the weight,
// lifts it off and waits until the empty pan was seen.
func (o *virtualOperator) weigh(ctx context.Context, want session.Awaited) error {
	o.bench.PutVesselOn()
	taken := int64(0)
	err := o.until(ctx, "the weight is taken", func(v *runView) bool {
		d := v.delivery(want.Delivery)
		if w := map[session.Role]*session.DocumentWeighing{session.Before: d.Before, session.After: d.After}[want.Role]; w != nil {
			taken = w.Fact
		}
		return taken != 0
	})
	if err != nil {
		return err
	}
	o.pause()
	o.bench.LiftVessel()
	err = o.until(ctx, "the empty pan is seen", func(v *runView) bool {
		n := len(v.Seen)
		return n > 0 && v.Seen[n-1].Fact > taken && v.Seen[n-1].MassG.Float() < 1
	})
	if err != nil {
		return err
	}
	o.pause()
	return nil
}

// until looks at the run again and again; what it waits for is announced by the
// daemon within a second or not at all.
func (o *virtualOperator) until(ctx context.Context, what string, done func(*runView) bool) error {
	ctx, cancel := context.WithTimeout(ctx, 60*time.Second)
	defer cancel()
	tick := time.NewTicker(15 * time.Millisecond)
	defer tick.Stop()
	for {
		view, err := o.look(ctx)
		if err != nil {
			return fmt.Errorf("waiting until %s: %w", what, err)
		}
		if done(view) {
			return nil
		}
		select {
		case <-tick.C:
		case <-ctx.Done():
			return fmt.Errorf("waiting until %s: %w", what, ctx.Err())
		}
	}
}

// mend looks again: a misreading is amended, a spoilt delivery is void.
func (o *virtualOperator) mend(ctx context.Context, view *runView) error {
	doubt := view.Doubt
	fmt.Fprintf(o.out, "      %s\n", doubt.Text)
	if doubt.Delivery == o.spill {
		fmt.Fprintf(o.out, "      delivery %d is void\n", doubt.Delivery)
		return o.order(ctx, o.api, "/void", map[string]any{"delivery": doubt.Delivery, "reason": "water went beside the vessel"})
	}
	if doubt.Delivery == o.misread {
		right := o.bench.Reading()
		fmt.Fprintf(o.out, "      a second look shows %s mL: amended\n", right)
		return o.order(ctx, o.api, "/amend", map[string]any{
			"fact": view.delivery(doubt.Delivery).End.Fact, "value": right, "reason": "misread by one line, looked again",
		})
	}
	return o.order(ctx, o.api, "/answer", map[string]any{"delivery": doubt.Delivery, "reason": "looked again, the values stand"})
}

// sign finishes the run and has another person review it.
func (o *virtualOperator) sign(ctx context.Context) error {
	if err := o.order(ctx, o.api, "/finish", map[string]any{"meaning": "performed"}); err != nil {
		return fmt.Errorf("finish: %w", err)
	}
	if err := o.order(ctx, o.reviewer, "/review", map[string]any{"meaning": "reviewed"}); err != nil {
		return fmt.Errorf("review: %w", err)
	}
	fmt.Fprintf(o.out, "signed by %s, reviewed by %s\n", o.api.operator, o.reviewer.operator)
	return o.until(ctx, "the run is published", func(v *runView) bool { return v.Run.State == string(session.Published) })
}
