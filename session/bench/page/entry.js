// The two fields at the bench. Enter moves on, then sends; a comma is a point; + - *
// and / of a numeric keypad never belong into a number and therefore do other things.

import { el, show } from "/dom.js";

export class Entry {
  /** hooks: {send(facts) → promise, mend(), spoil(), ambient()} */
  constructor(hooks) {
    this.hooks = hooks;
    this.reading = this.field("reading", "Burette reading", "mL");
    this.water = this.field("water", "Water temperature", "°C");
    this.button = el("button", { type: "submit", class: "go" }, "Record");
    this.message = el("p", { class: "problem", role: "alert", hidden: true });
    this.node = el("form", { class: "entry", autocomplete: "off", onsubmit: (e) => { e.preventDefault(); this.submit(); } },
      this.reading.box, this.water.box, this.button, this.message,
      el("p", { class: "keys" }, el("kbd", {}, "Enter"), " next field, then record   ", el("kbd", {}, "/"), " mend a value   ", el("kbd", {}, "*"), " spoil this delivery"));
  }

  field(name, label, unit) {
    const input = el("input", { id: "field-" + name, type: "text", inputmode: "decimal", autocomplete: "off", maxlength: 12, enterkeyhint: "next" });
    const about = el("span", { class: "about" });
    const box = el("div", { class: "field number" }, el("label", { for: "field-" + name }, label, about), el("span", { class: "with-unit" }, input, el("span", { class: "unit" }, unit)));
    input.addEventListener("keydown", (event) => this.key(event, input));
    return { input, about, box, wanted: null };
  }

  key(event, input) {
    if (event.key === "/") { event.preventDefault(); this.hooks.mend(); }
    if (event.key === "*") { event.preventDefault(); this.hooks.spoil(); }
    if (event.key === "+") { event.preventDefault(); (input === this.reading.input ? this.water : this.reading).input.focus(); }
    if (event.key === "-") event.preventDefault();
    // A start reading is recorded at once; an end reading waits for the temperature.
    const both = this.reading.wanted?.role === "end" && this.water.wanted && this.water.input.value === "";
    if (event.key === "Enter" && input === this.reading.input && both && input.value !== "") {
      event.preventDefault();
      this.water.input.focus();
    }
  }

  /** expect takes what the run awaits. */
  expect(awaits, open) {
    const next = (fact) => awaits.find((a) => a.fact === fact);
    this.reading.wanted = next("reading") || null;
    this.water.wanted = next("water_temp") || null;
    this.node.hidden = !open || awaits.length === 0;
    for (const f of [this.reading, this.water]) {
      f.box.classList.toggle("wanted", Boolean(f.wanted));
      show(f.about, f.wanted ? ` delivery ${f.wanted.delivery}${f.wanted.role ? ", " + f.wanted.role : ""}` : " not awaited now");
    }
  }

  /** focus goes to the field that is wanted first. */
  focus() {
    if (this.node.hidden || document.getElementById("dialog").open) return;
    (this.reading.wanted || !this.water.wanted ? this.reading : this.water).input.focus();
  }

  async submit() {
    const facts = {};
    const reading = this.reading.input.value.trim();
    const water = this.water.input.value.trim();
    if (reading) facts.reading = reading;
    if (water) facts.water_temp_C = water;
    if (reading && this.reading.wanted) Object.assign(facts, { delivery: this.reading.wanted.delivery });
    else if (water && this.water.wanted) Object.assign(facts, { delivery: this.water.wanted.delivery });
    if (!reading && !water) return this.reading.input.focus();
    this.button.disabled = true;
    try {
      await this.hooks.send(facts);
      this.message.hidden = true;
      this.reading.input.value = "";
      this.water.input.value = "";
      this.focus();
    } catch (problem) {
      show(this.message, el("strong", {}, problem.message), " ", problem.hint, problem.reference && ` (reference ${problem.reference})`);
      this.message.hidden = false;
    } finally {
      this.button.disabled = false;
    }
  }
}
