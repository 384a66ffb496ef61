package bench

import (
	"fmt"

	"tenthmark/session"
)

// signRequest signs a run. Where sign-in is on, the signer's secret is asked for again.
type signRequest struct {
	Meaning string `json:"meaning"`
	Secret  string `json:"secret"`
}

func (q signRequest) means(want string) error {
	if q.Meaning != want {
		return session.Refuse("bad-meaning", fmt.Sprintf("The signature means %q, this call signs %q.", q.Meaning, want), fmt.Sprintf("Send {\"meaning\": %q}. The sentence that is signed: %s", want, session.Statement(want)))
	}
	return nil
}

// sign reads the request, checks the secret where it is asked for, and orders.
func (b *Bench) sign(c *call, meaning string, decide func(r *session.Run, printed string) ([]session.Draft, error)) error {
	q, err := read[signRequest](c, maxBody)
	if err != nil {
		return err
	}
	if err := q.means(meaning); err != nil {
		return err
	}
	printed, err := b.signer(c, q.Secret)
	if err != nil {
		return err
	}
	return b.order(c, func(r *session.Run) ([]session.Draft, error) { return decide(r, printed) })
}

// signer gives the printed name of whoever signs, after their secret was checked.
func (b *Bench) signer(c *call, secret string) (string, error) {
	if b.SignIn {
		if err := b.checkSecret(c, c.who.name, secret, "signing"); err != nil {
			return "", err
		}
	}
	printed := c.who.name
	err := b.view(c.Context(), func(book *session.Book) error {
		if m := book.People[c.who.name]; m != nil {
			printed = m.PrintedName
		}
		return nil
	})
	return printed, err
}

func (b *Bench) finishRun(c *call) error {
	return b.sign(c, session.MeaningPerformed, func(r *session.Run, printed string) ([]session.Draft, error) {
		return r.Finish(printed, b.SignIn)
	})
}

func (b *Bench) reviewRun(c *call) error {
	return b.sign(c, session.MeaningReviewed, func(r *session.Run, printed string) ([]session.Draft, error) {
		return named(printed)(r.ApproveBy(c.who.actor(), b.SignIn))
	})
}

func (b *Bench) reviewTrail(c *call) error {
	return b.sign(c, session.MeaningTrail, func(r *session.Run, printed string) ([]session.Draft, error) {
		return named(printed)(r.ReviewTrail(c.who.actor(), b.SignIn))
	})
}

// named puts the printed name into a signature.
func named(printed string) func([]session.Draft, error) ([]session.Draft, error) {
	return func(drafts []session.Draft, err error) ([]session.Draft, error) {
		for i, d := range drafts {
			if body, is := d.Body.(session.SignedBody); is {
				body.Name = printed
				drafts[i].Body = body
			}
		}
		return drafts, err
	}
}
