// One run: at work on the bench, or looked at afterwards.

import { el, show, clock, day, signed } from "/dom.js";
import { get, post } from "/api.js";
import { ask } from "/dialog.js";
import { draw } from "/drawing.js";
import { list, aside, reasons } from "/deliveries.js";
import { Entry } from "/entry.js";
import { LiveWeight } from "/live.js";
import * as sound from "/sound.js";

export class RunView {
  constructor(house, id) {
    this.house = house;
    this.id = id;
    this.live = new LiveWeight();
    this.entry = new Entry({
      send: (facts) => this.order("facts", facts),
      mend: () => this.mendLast(),
      spoil: () => this.spoilCurrent(),
    });
    this.prompt = el("p", { class: "prompt", "aria-live": "polite" });
    this.doubt = el("section", { class: "doubt", role: "alert", hidden: true });
    this.title = el("div", { class: "title" });
    this.left = el("section", { class: "left", "aria-label": "Burette and correction curve" });
    this.ambient = el("div");
    this.signing = el("section", { class: "signing" });
    this.table = el("div");
    this.seen = el("div");
    this.record = el("div");
    this.node = el("div", { class: "bench" }, this.left, el("div", { class: "right" },
      this.title, this.prompt, this.doubt, this.live.node, this.ambient, this.entry.node, this.signing, this.seen, this.table, this.record));
    this.asked = 0;
  }

  end() { this.live.end(); }

  /** focus puts the cursor where the next number goes. */
  focus() {
    if (this.run?.run.state === "open") this.entry.focus();
  }

  path(more = "") { return `/runs/${encodeURIComponent(this.id)}${more}`; }

  async load() {
    const asked = ++this.asked;
    const run = await get(this.path());
    if (asked === this.asked) this.set(run);
    if (this.mpe === undefined) {
      this.mpe = 0;
      get("/burettes/" + encodeURIComponent(run.run.burette.burette)).then((b) => { this.mpe = b.mpe_mL || 0; this.set(this.run); }, () => {});
    }
  }

  async order(what, body) {
    const run = await post(this.path("/" + what), body);
    this.asked++;
    this.set(run);
    setTimeout(() => this.focus(), 0); // after a dialog has closed
    return run;
  }

  set(run) {
    this.run = run;
    const state = run.run.state;
    const open = state === "open";
    const current = run.awaits?.find((a) => a.delivery)?.delivery;
    show(this.title, el("h1", {}, run.run.id), el("span", { class: "badge " + state }, state),
      el("span", { class: "about" }, `${run.run.burette.capacity_mL} mL, class ${run.run.burette.class}, on ${run.run.station}, opened ${day(run.run.opened)} ${clock(run.run.opened)} by ${run.run.opened_by}`),
      run.run.superseded_by && el("p", { class: "warning" }, "Superseded by ", el("a", { href: "#/run/" + run.run.superseded_by }, run.run.superseded_by)));
    show(this.prompt, run.prompt || "");
    this.prompt.hidden = !run.prompt || Boolean(run.doubt);
    show(this.left, draw(run, this.mpe));
    this.entry.expect(run.awaits ?? [], open && !run.doubt);
    this.live.node.hidden = !open;
    this.showDoubt(run.doubt);
    this.showAmbient(run, open);
    const acts = open ? { amend: (fact, what, value) => this.amend(fact, what, value), spoil: (d) => this.spoil(d) } : null;
    show(this.table, list(run, acts));
    show(this.seen, aside(run, open && current ? (s) => this.take(s) : null));
    this.showSigning(run);
    this.showRecord(run);
  }

  showDoubt(doubt) {
    const was = this.doubt.hidden;
    this.doubt.hidden = !doubt;
    if (!doubt) return;
    if (was) sound.doubt();
    const end = this.run.deliveries[doubt.delivery - 1];
    show(this.doubt, el("h2", {}, el("span", { "aria-hidden": "true" }, "? "), `Delivery ${doubt.delivery} is in doubt`), el("p", {}, doubt.text),
      el("p", {}, "Look at the burette again before you go on."),
      el("div", { class: "buttons" },
        el("button", { type: "button", class: "go", onclick: () => this.amend(doubt.fact || end.end_reading.fact, "end reading", doubt.value || end.end_reading.reading_mL) }, doubt.value ? `Amend the reading (to ${doubt.value}?)` : "Amend the reading"),
        el("button", { type: "button", class: "danger", onclick: () => this.spoil(end) }, "Void the delivery"),
        el("button", { type: "button", class: "quiet", onclick: () => this.answer(doubt) }, "The values stand")));
  }

  showAmbient(run, open) {
    const last = run.ambient.at(-1);
    const change = () => this.askAmbient(last);
    const value = (name, unit) => [(last.amended ?? []).filter((c) => c.field === name).map((c) => [el("s", { title: c.reason }, c.was), " "]), last[name] + " " + unit];
    show(this.ambient, last
      ? el("p", { class: "ambient" }, "Air ", value("air_temp_C", "°C"), ", ", value("pressure_hPa", "hPa"), ", ", value("humidity_pct", "% rh"), ` at ${clock(last.at)} `,
        open && el("button", { type: "button", class: "small quiet", onclick: change }, "enter anew"))
      : open && el("button", { type: "button", class: "go", onclick: change }, "Enter the air’s temperature, pressure and humidity"));
  }

  askAmbient(last) {
    return ask({
      title: "The air around the balance", button: "Record",
      fields: [
        { name: "air_temp_C", label: "Temperature, °C", numeric: true, value: last?.air_temp_C },
        { name: "pressure_hPa", label: "Pressure, hPa (at the bench, not reduced to sea level)", numeric: true, value: last?.pressure_hPa },
        { name: "humidity_pct", label: "Relative humidity, %", numeric: true, value: last?.humidity_pct },
      ],
      act: (ambient) => this.order("facts", { ambient }),
    });
  }

  amend(fact, what, value) {
    return ask({
      title: `Amend the ${what}`, text: "The value that stands now stays in the record, struck through.", button: "Amend",
      fields: [{ name: "value", label: `The ${what} is`, numeric: true, value }, { name: "reason", label: "Because", choices: reasons.amend }],
      act: (v) => this.order("amend", { fact, value: v.value, reason: v.reason }),
    });
  }

  spoil(d) {
    return ask({
      title: `Void delivery ${d.delivery}`, text: "It stays in the record and does not count. The plan grows a delivery in its place.", button: "Void it", danger: true,
      fields: [{ name: "reason", label: "Because", choices: reasons.void }],
      act: (v) => this.order("void", { delivery: d.delivery, reason: v.reason }),
    });
  }

  answer(doubt) {
    return ask({
      title: `The values of delivery ${doubt.delivery} stand`, text: doubt.text, button: "They stand",
      fields: [{ name: "reason", label: "Because", choices: reasons.answer }],
      act: (v) => this.order("answer", { delivery: doubt.delivery, reason: v.reason }),
    });
  }

  take(s) {
    return ask({
      title: `Take ${s.mass_g} g`, text: `It was not taken because ${s.why}.`, button: "Take it",
      fields: [{ name: "reason", label: "It belongs here because", choices: reasons.take }],
      act: (v) => this.order("take", { seen: s.fact, reason: v.reason }),
    });
  }

  step(what, title, text, danger) {
    return ask({
      title, text, button: title, danger, fields: [{ name: "reason", label: "Because", choices: reasons[what] }],
      act: (v) => this.order(what, { reason: v.reason }),
    });
  }

  /** mendLast is for the keypad: the value entered last. */
  mendLast() {
    let last = null;
    for (const d of this.run.deliveries) {
      if (d.void) continue;
      for (const [fact, what, name] of [[d.start_reading, "start reading", "reading_mL"], [d.end_reading, "end reading", "reading_mL"], [d.water_temp, "water temperature", "water_temp_C"]]) {
        if (fact && (!last || fact.fact > last.fact)) last = { fact: fact.fact, what: `${what} of delivery ${d.delivery}`, value: fact[name] };
      }
    }
    if (last) this.amend(last.fact, last.what, last.value);
  }

  spoilCurrent() {
    const current = this.run.awaits?.find((a) => a.delivery)?.delivery;
    if (current) this.spoil(this.run.deliveries[current - 1]);
  }

  sign(what, meaning, title) {
    const fields = this.house.me.sign_in ? [{ name: "secret", label: `Your secret, ${this.house.me.operator}`, type: "password" }] : [];
    return ask({
      title, text: this.house.me.statements?.[meaning], button: "Sign", fields,
      act: (v) => this.order(what, { meaning, ...(v.secret ? { secret: v.secret } : {}) }),
    });
  }

  showSigning(run) {
    const button = (text, act, kind = "quiet") => el("button", { type: "button", class: kind, onclick: act }, text);
    const state = run.run.state;
    const done = state === "open" && !run.awaits?.length;
    const verdict = run.conformity && el("p", { class: "verdict" }, el("strong", {}, `${run.conformity.verdict} class ${run.conformity.class}`),
      ` (±${run.conformity.mpe_mL} mL, ${run.conformity.standard}, rule ${run.conformity.rule}), probability of conformity ${run.conformity.p_conform.toFixed(3)}`);
    show(this.signing, (done || state !== "open") && verdict,
      run.documents && el("p", { class: "documents" }, "Documents: ", (run.documents ?? []).map((name) => [el("a", { href: `/api/v1/runs/${run.run.id}/documents/${name}` }, name), " "])),
      el("div", { class: "buttons" },
        done && button("Sign as performed", () => this.sign("finish", "performed", "Sign as performed"), "go"),
        (state === "published" || state === "abandoned") && button("Back to the bench", () => { location.hash = "#/"; dispatchEvent(new Event("hashchange")); }),
        state === "finished" && button("Review and sign", () => this.sign("review", "reviewed", "Sign as reviewed"), "go"),
        state === "finished" && button("Sign the review of changes", () => this.sign("trail-review", "trail-reviewed", "Sign the review of changes")),
        state === "finished" && button("Reopen", () => this.step("reopen", "Reopen the run", "The signature does not count any more; the record keeps it.")),
        state === "suspended" && button("Resume", () => this.step("resume", "Resume the run", "Any operator may go on with it."), "go"),
        state === "open" && button("Suspend", () => this.step("suspend", "Suspend the run", "The station is free; the run can be resumed any day.")),
        (state === "open" || state === "suspended") && button("Abandon", () => this.step("abandon", "Abandon the run", "It stays in the record and cannot be resumed.", true))));
  }

  showRecord(run) {
    const rows = [...run.changes.map((c) => [c.event, clock(c.at), c.by, words[c.kind] || c.kind, c.was ? `${c.was} → ${c.value}` : c.delivery ? `delivery ${c.delivery}` : "", c.reason]),
      ...run.signatures.map((s) => [s.event, clock(s.at), s.name, "signed: " + s.meaning, s.sign_in ? "with secret" : "sign-in was off", s.statement])].sort((a, b) => a[0] - b[0]);
    show(this.record, rows.length > 0 && el("details", { class: "record", open: run.run.state !== "open" }, el("summary", {}, `Changes and signatures (${rows.length})`),
      el("div", { class: "scroll" }, el("table", {}, el("tbody", {}, rows.map((r) => el("tr", {}, r.map((text) => el("td", {}, String(text))))))))),
      run.curve && el("details", { class: "record", open: run.run.state !== "open" }, el("summary", {}, "Correction curve"), el("table", { class: "points" },
        el("thead", {}, el("tr", {}, ["reading, mL", "correction, mL", "U, mL", "k"].map((h) => el("th", { scope: "col" }, h)))),
        el("tbody", {}, run.curve.points.map((p) => el("tr", {}, el("td", {}, String(p.reading_mL)), el("td", {}, signed(p.correction_mL, 4)), el("td", {}, p.U_mL.toFixed(4)), el("td", {}, p.k.toFixed(2))))))));
  }

  /** heard takes an event of the ledger. */
  heard(event) {
    if (event.subject !== this.id) return;
    if (event.kind === "weighing") {
      sound.taken();
      this.live.taken(event.body.mass_g, `Taken: ${event.body.mass_g} g, ${event.body.role} delivery ${event.body.delivery}`);
    } else if (event.kind === "seen") {
      sound.seen();
      this.live.tell(`Seen, not taken: ${event.body.mass_g} g; ${event.body.why}`, "seen");
    }
    clearTimeout(this.soon);
    this.soon = setTimeout(() => this.load().catch(() => {}), 40);
  }
}

const words = {
  amended: "amended", voided: "void", answered: "values stand", "run.suspended": "suspended", "run.resumed": "resumed",
  "run.abandoned": "abandoned", "run.reopened": "reopened", "run.superseded": "superseded",
};
