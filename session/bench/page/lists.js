// The pages that list: runs, burettes, people; and the form that opens a run.

import { el, show, day, clock } from "/dom.js";
import { get, post, put } from "/api.js";
import { ask } from "/dialog.js";

export async function runsPage() {
  const { runs, more } = await get("/runs?limit=100");
  return el("div", { class: "page" }, el("h1", {}, "Runs"),
    runs.length ? el("table", {}, el("thead", {}, head("run", "state", "station", "opened", "by", "signed by", "reviewed by")),
      el("tbody", {}, runs.map((r) => el("tr", {}, el("td", {}, el("a", { href: "#/run/" + encodeURIComponent(r.id) }, r.id)), el("td", {}, el("span", { class: "badge " + r.state }, r.state), r.superseded_by ? ` superseded by ${r.superseded_by}` : ""),
        el("td", {}, r.station), el("td", {}, `${day(r.opened)} ${clock(r.opened)}`), el("td", {}, r.opened_by), el("td", {}, r.performed_by || ""), el("td", {}, r.reviewed_by || "")))))
      : el("p", {}, "There are no runs yet."), more && el("p", {}, "Older ones are not listed here."));
}

const head = (...names) => el("tr", {}, names.map((n) => el("th", { scope: "col" }, n)));

export async function burettesPage() {
  const { burettes } = await get("/burettes");
  const again = async () => { location.reload(); };
  return el("div", { class: "page" }, el("h1", {}, "Burettes"),
    burettes.length ? el("table", {}, el("thead", {}, head("burette", "capacity, mL", "line, mL", "class", "limit, mL", "calibrated", "due", "run", "")),
      el("tbody", {}, burettes.map((b) => el("tr", {}, el("td", {}, b.burette), el("td", {}, b.capacity_mL), el("td", {}, b.subdivision_mL), el("td", {}, b.class), el("td", {}, b.mpe_mL ? "±" + b.mpe_mL : ""),
        el("td", {}, day(b.last_on) || "never"), el("td", { class: b.overdue ? "overdue" : "" }, b.overdue ? "overdue since " : "", day(b.due_on)),
        el("td", {}, b.open_run ? el("a", { href: "#/run/" + b.open_run }, `${b.open_run} (${b.open_state})`) : b.last_run ? el("a", { href: "#/run/" + b.last_run }, b.last_run) : ""),
        el("td", {}, b.retired ? "out of service" : "")))))
      : el("p", {}, "The register is empty."),
    el("p", {}, el("button", { type: "button", class: "go", onclick: () => registerBurette().then((done) => done && again()) }, "Register a burette")));
}

export function registerBurette() {
  return ask({
    title: "Register a burette", text: "As engraved on the glass. The name is given once and for ever.", button: "Register",
    fields: [
      { name: "burette", label: "Name in the laboratory", value: "" },
      { name: "capacity_mL", label: "Nominal capacity, mL", numeric: true, value: "50" },
      { name: "subdivision_mL", label: "From line to line, mL", numeric: true, value: "0.1" },
      { name: "class", label: "Class", value: "AS", choices: ["A", "AS", "B"] },
      { name: "wait_s", label: "Waiting time before reading, s", numeric: true, value: "30" },
      { name: "interval_months", label: "Calibrate every … months (0: not agreed)", numeric: true, value: "12" },
    ],
    act: (v) => post("/burettes", { ...v, wait_s: Number(v.wait_s), interval_months: Number(v.interval_months), class: v.class.toUpperCase() }),
  });
}

export async function peoplePage(house) {
  const { operators } = await get("/operators");
  const again = (done) => { if (done) location.reload(); };
  const table = operators.length > 0 && el("table", {}, el("thead", {}, head("name", "printed name", "roles", "state", "")),
    el("tbody", {}, operators.map((p) => el("tr", {}, el("td", {}, p.operator), el("td", {}, p.name), el("td", {}, p.roles.join(", ")),
      el("td", {}, p.disabled ? "disabled" : p.locked ? el("strong", { class: "warning" }, `locked until ${clock(p.locked_until)}: too many wrong secrets`) : p.has_secret ? "can sign in" : "no secret set"),
      el("td", {}, el("button", { type: "button", class: "small quiet", onclick: () => changePerson(p).then(again) }, "change"))))));
  return el("div", { class: "page" }, el("h1", {}, "People"),
    !house.me.sign_in && el("p", { class: "warning" }, "Sign-in is switched off here: names are taken at their word, and every signature says so."),
    table || el("p", {}, "Nobody is registered."),
    el("p", {}, el("button", { type: "button", class: "go", onclick: () => addPerson().then(again) }, "Register somebody")));
}

const roles = (text) => text.split(/[,\s]+/).filter(Boolean);

function addPerson() {
  return ask({
    title: "Register somebody", text: "A name is given once: whoever leaves is disabled, never removed.", button: "Register",
    fields: [{ name: "operator", label: "Name for signing in" }, { name: "name", label: "Printed name" }, { name: "roles", label: "Roles", choices: ["operator", "operator, reviewer", "reviewer", "administrator"] },
      { name: "secret", label: "First secret (at least 8 characters)", type: "password" }],
    act: (v) => post("/operators", { operator: v.operator, name: v.name, roles: roles(v.roles), ...(v.secret ? { secret: v.secret } : {}) }),
  });
}

function changePerson(p) {
  return ask({
    title: `Change ${p.operator}`, text: "Any change also unlocks the name and ends its sessions.", button: "Change",
    fields: [{ name: "name", label: "Printed name", value: p.name }, { name: "roles", label: "Roles", value: p.roles.join(", ") }, { name: "disabled", label: "Disabled (yes or no)", value: p.disabled ? "yes" : "no" },
      { name: "secret", label: "New secret (empty: stays)", type: "password" }, { name: "reason", label: "Because", choices: ["forgot the secret", "new role", "left the laboratory", "unlock"] }],
    act: (v) => put("/operators/" + encodeURIComponent(p.operator), { name: v.name, roles: roles(v.roles), disabled: v.disabled === "yes", reason: v.reason, ...(v.secret ? { secret: v.secret } : {}) }),
  });
}

/** openForm opens a run on a station. */
export async function openForm(station, opened) {
  const { burettes } = await get("/burettes");
  const usable = burettes.filter((b) => !b.retired);
  if (!usable.length) {
    return el("section", { class: "card" }, el("h2", {}, "Open a run"), el("p", {}, "The register has no burette yet."),
      el("button", { type: "button", class: "go", onclick: () => registerBurette().then((done) => done && location.reload()) }, "Register a burette"));
  }
  const message = el("p", { class: "problem", role: "alert", hidden: true });
  const select = (name, options) => el("select", { id: "open-" + name, name }, options.map(([value, text]) => el("option", { value }, text)));
  const input = (name, value, more = {}) => el("input", { id: "open-" + name, name, value, inputmode: "decimal", autocomplete: "off", ...more });
  const field = (label, node, about) => el("div", { class: "field" }, el("label", { for: node.id }, label), node, about && el("small", {}, about));
  const burette = select("burette", usable.map((b) => [b.burette, `${b.burette}: ${b.capacity_mL} mL, class ${b.class}`]));
  const points = input("points", "");
  const suggest = () => {
    const b = usable.find((x) => x.burette === burette.value);
    points.value = [1, 2, 3, 4, 5].map((i) => Math.round(b.capacity_mL * i / 5 * 1000) / 1000).join(" ");
  };
  burette.addEventListener("change", suggest);
  suggest();
  const replicates = input("replicates", "2");
  const reading = select("reading", [["stepwise", "stepwise: each delivery starts where the last ended"], ["from-zero", "from zero: refilled before each"]]);
  const weighing = select("weighing", [["separate", "before and after every delivery"], ["running", "vessel not emptied in between"], ["tared", "tared with the vessel on"]]);
  const air = input("air", ""), pressure = input("pressure", ""), humidity = input("humidity", "");
  const submit = async (event) => {
    event.preventDefault();
    const body = {
      burette: burette.value, station,
      plan: { points_mL: points.value.trim().split(/[\s;]+/).filter(Boolean), replicates: Number(replicates.value), reading_pattern: reading.value, weighing_pattern: weighing.value },
    };
    if (air.value || pressure.value || humidity.value) body.ambient = { air_temp_C: air.value || null, pressure_hPa: pressure.value || null, humidity_pct: humidity.value || null };
    try {
      opened(await post("/runs", body));
    } catch (problem) {
      show(message, el("strong", {}, problem.message), " ", problem.hint);
      message.hidden = false;
    }
  };
  return el("form", { class: "card open", onsubmit: submit }, el("h2", {}, "Open a run on " + station),
    field("Burette", burette), el("div", { class: "pair" }, field("Test points, mL", points, "rising, a blank between"), field("Replicates", replicates)),
    field("Reading", reading), field("Weighing", weighing),
    el("div", { class: "pair" }, field("Air, °C", air), field("Pressure, hPa", pressure), field("Humidity, %", humidity)),
    el("small", {}, "The air’s state can also be entered later."), message,
    el("div", { class: "buttons" }, el("button", { type: "submit", class: "go" }, "Open the run")));
}
