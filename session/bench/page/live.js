// The live weight. A value is shown as live only while it is young; after that its
// digits give way to how long there was none.

import { el, svg, show } from "/dom.js";

const staleMS = 2000;
const radius = 54;
const around = 2 * Math.PI * radius;

export class LiveWeight {
  constructor() {
    this.arc = svg("circle", { class: "arc", cx: 64, cy: 64, r: radius, "stroke-dasharray": around, "stroke-dashoffset": around, transform: "rotate(-90 64 64)" });
    this.phase = svg("text", { class: "phase", x: 64, y: 69, "text-anchor": "middle" });
    this.ring = svg("svg", { class: "ring", viewBox: "0 0 128 128", "aria-hidden": "true" },
      svg("circle", { class: "track", cx: 64, cy: 64, r: radius }), this.arc, this.phase);
    this.digits = el("span", { class: "digits" });
    this.unit = el("span", { class: "unit" });
    this.note = el("p", { class: "note", role: "status" });
    this.news = el("p", { class: "news", role: "status", "aria-live": "polite" });
    this.node = el("section", { class: "live", "aria-label": "Live weight" },
      this.ring, el("div", { class: "value" }, el("div", { class: "reading" }, this.digits, this.unit), this.note, this.news));
    this.timer = setInterval(() => this.draw(), 200);
    this.station = null;
    this.connected = false;
  }

  end() { clearInterval(this.timer); }

  /** set takes the newest state of the station. */
  set(station) {
    this.station = station;
    this.at = performance.now();
    this.draw();
  }

  /** taken keeps the ring closed until the load moves again. */
  taken(massG, text) {
    this.takenG = massG;
    this.tell(text, "taken");
    this.draw();
  }

  tell(text, kind) {
    show(this.news, text);
    this.news.dataset.kind = kind;
    this.news.classList.remove("fresh");
    void this.news.offsetWidth; // starts the animation again
    this.news.classList.add("fresh");
  }

  draw() {
    const s = this.station;
    const live = s?.live;
    const age = live ? live.age_ms + (performance.now() - this.at) : Infinity;
    if (!this.connected) return this.without("no connection", "The page has lost the daemon; it tries again by itself. Nothing you enter now is recorded.");
    if (!s) return this.without("…", "");
    if (s.state !== "online") return this.without("offline", [s.reason || "The balance is not there.", s.hint].filter(Boolean).join(" "));
    if (!live) return this.without("no value", ["The balance has not sent a value yet.", s.reason, s.hint].filter(Boolean).join(" "));
    if (age > staleMS) return this.without("silent", `no live value since ${Math.floor(age / 1000)} s. ${s.hint || "Is the balance switched on, and does it send?"}`);
    if (live.status) return this.without(live.status, statusWords[live.status] || "");
    this.node.dataset.state = live.stable ? "stable" : "moving";
    show(this.digits, live.text.trim());
    show(this.unit, live.unit || "g?");
    this.unit.title = live.unit ? "" : "The balance leaves the unit out while the value moves.";
    show(this.note, live.stable ? "at rest" : "moving", ` · ${age < 1000 ? "now" : Math.floor(age / 1000) + " s ago"}`);
    if (!live.stable) this.takenG = "";
    const taken = Boolean(this.takenG);
    const progress = taken ? 1 : Math.max(0, Math.min(1, live.progress || 0));
    this.arc.setAttribute("stroke-dashoffset", around * (1 - progress));
    this.arc.classList.toggle("taken", taken);
    show(this.phase, taken ? "✓ taken" : progress >= 1 ? "settled" : progress > 0 ? "settling" : live.stable ? "at rest" : "moving");
  }

  without(word, text) {
    this.node.dataset.state = "none";
    show(this.digits, "—");
    show(this.unit);
    show(this.note, el("strong", {}, word), text && ": ", text);
    this.arc.setAttribute("stroke-dashoffset", around);
    show(this.phase, word.length < 10 ? word : "none");
  }
}

const statusWords = {
  overload: "more on the pan than the balance can weigh: take it off.",
  underload: "less than nothing on the pan: is the pan in its place?",
  adjusting: "the balance adjusts itself: wait.",
};
