package session

import "fmt"

// The meanings of a signature.
const (
	MeaningPerformed = "performed"
	MeaningReviewed  = "reviewed"
	MeaningTrail     = "trail-reviewed"
)

// Step decides on suspending, resuming, abandoning or reopening a run.
func (r *Run) Step(kind Kind, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err != nil {
		return nil, err
	}
	allowed := map[Kind][]State{
		RunSuspended: {Open},
		RunResumed:   {Suspended},
		RunAbandoned: {Open, Suspended, Finished},
		RunReopened:  {Finished},
	}
	for _, state := range allowed[kind] {
		if r.State == state {
			return []Draft{r.draft(kind, ReasonBody{Reason: reason})}, nil
		}
	}
	return nil, Refuse("wrong-state", fmt.Sprintf("Run %s is %s; that step is not possible now.", r.ID, r.State), r.Prompt())
}

// Finish decides on signing the run as performed. Every delivery must be complete
// and beyond doubt, and the curve must come out.
func (r *Run) Finish(signer string, signIn bool) ([]Draft, error) {
	if err := r.mustBeOpen(); err != nil {
		return nil, err
	}
	if d := r.current(); d != nil {
		return nil, Refuse("run-incomplete", fmt.Sprintf("Delivery %d is not done: %s", d.Number, r.Prompt()), "Complete or answer it first. A delivery that went wrong can be voided; a run that cannot be completed can be abandoned.")
	}
	if _, err := r.Curve(); err != nil {
		return nil, &Fault{Code: "no-curve", Message: fmt.Sprintf("Run %s gives no curve.", r.ID), Hint: "Check readings and temperatures; the cause is named in the log.", Err: err}
	}
	return []Draft{r.draft(RunFinished, r.signed(MeaningPerformed, signer, signIn))}, nil
}

// ApproveBy decides on signing the run as reviewed. Nobody reviews their own run.
func (r *Run) ApproveBy(signer Actor, signIn bool) ([]Draft, error) {
	if r.State != Finished && !(r.State == Published && r.Review == nil) {
		return nil, Refuse("wrong-state", fmt.Sprintf("Run %s is %s; only a finished run is reviewed.", r.ID, r.State), r.Prompt())
	}
	if signer == r.Performed.By || r.tookPart(signer) {
		return nil, Refuse("own-run", fmt.Sprintf("%s took part in run %s and cannot review it.", signer.Name(), r.ID), "Another person reviews it.")
	}
	return []Draft{r.draft(RunReviewed, r.signed(MeaningReviewed, signer.Name(), signIn))}, nil
}

// ReviewTrail decides on signing that the run's changes were looked through. It comes
// before the approval and, like that, is another person's work.
func (r *Run) ReviewTrail(signer Actor, signIn bool) ([]Draft, error) {
	if r.State != Finished {
		return nil, Refuse("wrong-state", fmt.Sprintf("Run %s is %s; the changes of a finished run are reviewed.", r.ID, r.State), r.Prompt())
	}
	if signer == r.Performed.By || r.tookPart(signer) {
		return nil, Refuse("own-run", fmt.Sprintf("%s took part in run %s and cannot review its changes.", signer.Name(), r.ID), "Another person reviews them.")
	}
	return []Draft{r.draft(TrailReviewed, r.signed(MeaningTrail, signer.Name(), signIn))}, nil
}

// tookPart says whether somebody entered or changed anything in the run.
func (r *Run) tookPart(who Actor) bool {
	for _, c := range r.Changes {
		if c.By == who.Name() {
			return true
		}
	}
	for _, d := range r.Deliveries {
		if d.Start != nil && d.Start.By == who || d.End != nil && d.End.By == who || d.Water != nil && d.Water.By == who {
			return true
		}
	}
	return r.OpenedBy == who
}

// statements are the sentences that signers see; their version is part of the text.
var statements = map[string]string{
	MeaningPerformed: "I performed this calibration as recorded here; the record is complete and true. (statement 1)",
	MeaningReviewed:  "I reviewed this calibration and its changes and approve it for publication. (statement 1)",
	MeaningTrail:     "I looked through the changes, exclusions and late entries of this calibration. (statement 1)",
}

// Statement gives the sentence that a signature of this meaning signs.
func Statement(meaning string) string { return statements[meaning] }

func (r *Run) signed(meaning, name string, signIn bool) SignedBody {
	return SignedBody{Meaning: meaning, Name: name, Statement: statements[meaning], RecordSHA256: r.RecordHash(), SignIn: signIn}
}
