// The deliveries as a list. Entered values are buttons: pressing one mends it. A value
// that was changed shows the one before.

import { el, signed, clock } from "/dom.js";
import { stateOf } from "/drawing.js";

export const reasons = {
  amend: ["misread by one line, looked again", "typing slip", "read before the wait was over", "read at the wrong edge of the meniscus"],
  void: ["a drop hung at the tip", "water went beside the vessel", "air bubble in the tip", "the vessel was touched or wet", "overshot the mark"],
  answer: ["looked again, the values stand", "known from the last calibration"],
  take: ["the right vessel, the plan expected less or more", "delivered to another mark than planned", "the window is too narrow for this vessel"],
  suspend: ["end of the day", "the balance is needed elsewhere", "the room is not steady"],
  resume: ["work goes on"],
  abandon: ["the stopcock leaks", "the burette is dirty", "opened by mistake", "the balance is out of order"],
  reopen: ["a value has to be amended", "one more delivery is needed"],
};

/** list gives the table. acts: {amend(fact, label, value, field), spoil(delivery)} or null when nothing can be changed. */
export function list(run, acts) {
  const current = run.awaits?.find((a) => a.delivery)?.delivery;
  const seen = new Set();
  return el("div", { class: "scroll" }, el("table", { class: "deliveries" },
    el("caption", {}, "Deliveries"),
    el("thead", {}, el("tr", {}, ["", "no.", "plan, mL", "start, mL", "end, mL", "before, g", "after, g", "water, °C", "correction, mL", ""].map((h) => el("th", { scope: "col" }, h)))),
    el("tbody", {}, run.deliveries.map((d) => row(run, d, current, acts, seen)))));
}

function row(run, d, current, acts, seen) {
  const state = stateOf(d, current, run.doubt?.delivery);
  const can = acts && !d.void ? acts : null;
  return el("tr", { class: state.word.replace(" ", "-"), "aria-current": d.delivery === current ? "step" : undefined },
    el("td", { class: "state" }, el("span", { title: state.word }, state.sign), el("span", { class: "unseen" }, state.word)),
    el("td", {}, String(d.delivery), d.replaces ? el("small", {}, ` for ${d.replaces}`) : ""),
    el("td", { class: "plan" }, `${d.from_mL} → ${d.point_mL}`),
    el("td", {}, entered(d.start_reading, "reading_mL", "start reading", can, seen)),
    el("td", {}, entered(d.end_reading, "reading_mL", "end reading", can, seen)),
    el("td", {}, weight(d.before, seen)), el("td", {}, weight(d.after, seen)),
    el("td", {}, entered(d.water_temp, "water_temp_C", "water temperature", can, seen)),
    el("td", { class: "result" }, d.correction_mL === undefined ? "" : signed(d.correction_mL, 4)),
    el("td", { class: "acts" }, d.void ? el("small", {}, "void: " + d.void_reason)
      : can && begun(d, seen) ? el("button", { type: "button", class: "small quiet", onclick: () => can.spoil(d) }, "void") : ""));
}

const begun = (d) => d.before || d.after || d.end_reading || d.water_temp;

/** entered shows a value; one that two deliveries share is shown in grey the second time. */
function entered(fact, name, what, acts, seen) {
  if (!fact) return "";
  const shared = seen.has(fact.fact);
  seen.add(fact.fact);
  const before = (shared ? [] : fact.amended ?? []).map((c) => el("s", { title: `${c.reason} (${c.by}, ${clock(c.at)})` }, c.was));
  const value = fact[name];
  const node = acts && !shared
    ? el("button", { type: "button", class: "value", title: "Mend this value", onclick: () => acts.amend(fact.fact, what, value) }, value)
    : el("span", { class: shared ? "shared" : "" , title: shared ? "the same reading as above" : `${fact.by}, ${clock(fact.at)}` }, value);
  return before.length ? [before, " ", node, el("small", { class: "changed" }, " changed")] : node;
}

function weight(w, seen) {
  if (!w) return "";
  const shared = seen.has(w.fact);
  seen.add(w.fact);
  return [el("span", { class: shared ? "shared" : "", title: shared ? "the same weight as above" : "taken at " + clock(w.at) }, w.mass_g), w.reason ? el("small", { title: w.reason }, " by hand") : ""];
}

/** aside lists the weights that were seen and not taken, newest first. */
export function aside(run, take) {
  const open = run.seen.filter((s) => !s.taken).slice(-4).reverse();
  if (!open.length) return null;
  return el("details", { class: "seen" }, el("summary", {}, `Weights seen and not taken (${run.seen.filter((s) => !s.taken).length})`),
    el("ul", {}, open.map((s) => el("li", {}, el("b", {}, s.mass_g + " g"), ` at ${clock(s.at)}: ${s.why} `,
      take ? el("button", { type: "button", class: "small quiet", onclick: () => take(s) }, "take it anyway") : ""))));
}
