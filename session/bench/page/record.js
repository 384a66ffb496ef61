// The record: who did what, when, about what, straight from the ledger's own lines.

import { el, show, day, clock } from "/dom.js";
import { get, lines } from "/api.js";

const page = 300;

export async function recordPage() {
  const table = el("tbody");
  const message = el("p", { class: "about", role: "status" });
  const field = (name, label, hint) => {
    const input = el("input", { id: "record-" + name, placeholder: hint, autocomplete: "off", maxlength: 64 });
    return { input, box: el("div", { class: "field" }, el("label", { for: input.id }, label), input) };
  };
  const run = field("run", "About", "a run, burette, person or station");
  const actor = field("actor", "By", "operator:anna, station:bench-1, daemon");
  const kind = field("kind", "What", "reading, amended, run.finished …");

  const find = async () => {
    const filters = { run: run.input.value.trim(), actor: actor.input.value.trim(), kind: kind.input.value.trim() };
    const query = new URLSearchParams(Object.entries(filters).filter(([, v]) => v));
    const filtered = query.size > 0;
    const { ledger } = await get("/health");
    query.set("after", String(filtered ? -1 : Math.max(-1, ledger.size - 1 - page)));
    query.set("limit", filtered ? "10000" : String(page));
    const events = (await lines("/ledger/events?" + query)).reverse();
    show(message, `${events.length} of ${ledger.size} events, newest first.`);
    show(table, events.slice(0, 2000).map((e) => el("tr", {}, el("td", {}, String(e.seq)), el("td", { class: "when" }, `${day(e.at)} ${clock(e.at)}`), el("td", {}, e.actor), el("td", {}, e.kind),
      el("td", {}, /^.+-\d{8}-\d+$/.test(e.subject) ? el("a", { href: "#/run/" + encodeURIComponent(e.subject) }, e.subject) : e.subject), el("td", { class: "body" }, words(e.body)))));
  };
  const form = el("form", { class: "filter", onsubmit: (event) => { event.preventDefault(); find().catch((p) => show(message, p.message)); } },
    run.box, actor.box, kind.box, el("button", { type: "submit", class: "go" }, "Show"));
  await find();
  return el("div", { class: "page wide" }, el("h1", {}, "Record"), el("p", { class: "about" }, "Every event as it is stored. Nothing here can be changed; whether anything was, tenthmark ledger verify says."), form, message,
    el("div", { class: "scroll" }, el("table", {}, el("thead", {}, el("tr", {}, ["no.", "when", "by", "what", "about", "content"].map((h) => el("th", { scope: "col" }, h)))), table)));
}

/** words writes a body flat: name value, name value. */
function words(body, prefix = "") {
  if (body === null || typeof body !== "object") return `${prefix} ${body}`;
  const parts = Object.entries(body).filter(([, v]) => v !== "" && v !== null).map(([name, v]) => words(v, prefix ? prefix + "." + name : name));
  const text = parts.filter(Boolean).join(", ");
  return prefix || text.length < 400 ? text : text.slice(0, 400) + " …";
}
