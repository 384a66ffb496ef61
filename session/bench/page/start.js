// Starts the page: who is there, the stream, and which page is shown.

import { el, show, day } from "/dom.js";
import { get, post, operator } from "/api.js";
import { ask } from "/dialog.js";
import { listen } from "/stream.js";
import { setUpSound } from "/sound.js";
import { RunView } from "/run.js";
import { LiveWeight } from "/live.js";
import { recordPage } from "/record.js";
import { runsPage, burettesPage, peoplePage, openForm } from "/lists.js";

const house = { me: { sign_in: false, operator: "", roles: [] }, stations: new Map(), connected: false, view: null };
const page = document.getElementById("page");

async function who() {
  house.me = await get("/me");
  const place = document.getElementById("who");
  if (!house.me.sign_in) {
    const input = el("input", { id: "operator", value: operator.name, placeholder: "your name", autocomplete: "off", maxlength: 32, size: 14 });
    input.addEventListener("change", () => { operator.name = input.value; });
    show(place, el("label", { for: "operator" }, "Operator "), input);
    return true;
  }
  if (!house.me.operator) {
    show(place, el("button", { type: "button", class: "go", onclick: signIn }, "Sign in"));
    return false;
  }
  show(place, `${house.me.name || house.me.operator} (${house.me.roles.join(", ")}) `, el("button", { type: "button", class: "quiet", onclick: signOut }, "Sign out"));
  return true;
}

async function signIn() {
  const done = await ask({
    title: "Sign in", text: "With your own name and secret.", button: "Sign in",
    fields: [{ name: "operator", label: "Name" }, { name: "secret", label: "Secret", type: "password" }],
    act: (v) => post("/sign-in", { operator: v.operator, secret: v.secret }),
  });
  if (done) location.reload();
}

async function signOut() {
  await post("/sign-out", {}).catch(() => {});
  location.reload();
}

/** bench shows the run that is open at a station, or the form that opens one. */
async function bench() {
  const { stations } = await get("/stations");
  for (const s of stations) house.stations.set(s.name, s);
  const { runs } = await get("/runs?limit=200");
  const wanted = localStorage.getItem("station");
  const name = stations.find((s) => s.name === wanted)?.name ?? stations[0]?.name;
  const pick = stations.length > 1 && el("p", { class: "stations" }, stations.map((s) => el("button", {
    type: "button", class: s.name === name ? "chosen" : "quiet", "aria-pressed": String(s.name === name),
    onclick: () => { localStorage.setItem("station", s.name); route(); },
  }, `${s.name} (${s.state})`)));
  if (!name) return el("div", { class: "page" }, el("h1", {}, "No station"), el("p", {}, "The configuration has no [[station]]: add the balance there and start the daemon again."));
  const open = runs.find((r) => r.state === "open" && r.station === name);
  if (open) {
    const view = await runView(open.id);
    return el("div", {}, pick, view);
  }
  const live = new LiveWeight();
  const latest = runs.slice(0, 6);
  house.view = { station: name, live, end: () => live.end(), heard: (e) => { if (e.kind === "run.opened") route(); } };
  return el("div", {}, pick, el("div", { class: "idle" }, el("div", {}, live.node,
    latest.length > 0 && el("section", { class: "card" }, el("h2", {}, "Latest runs"), el("ul", { class: "plain" }, latest.map((r) => el("li", {}, el("a", { href: "#/run/" + encodeURIComponent(r.id) }, r.id), " ", el("span", { class: "badge " + r.state }, r.state), " ", day(r.opened)))))),
  await openForm(name, () => route())));
}

async function runView(id) {
  const view = new RunView(house, id);
  await view.load();
  view.station = view.run.run.station;
  house.view = view;
  return view.node;
}

let turn = 0;

async function route() {
  const mine = ++turn;
  const old = house.view;
  house.view = null;
  house.failed = false;
  old?.end?.();
  const [, name, argument] = location.hash.split("/");
  try {
    const node = await (name === "runs" ? runsPage() : name === "burettes" ? burettesPage() : name === "people" ? peoplePage(house) : name === "record" ? recordPage()
      : name === "run" ? runView(decodeURIComponent(argument)) : bench());
    if (mine !== turn) return;
    show(page, node);
    tell();
    house.view?.focus?.();
  } catch (problem) {
    house.failed = true;
    if (mine === turn) show(page, el("div", { class: "page" }, el("p", { class: "problem", role: "alert" }, el("strong", {}, problem.message), " ", problem.hint || "")));
  }
  for (const a of document.querySelectorAll("nav a")) a.toggleAttribute("aria-current", a.getAttribute("href") === "#/" + (name === "run" ? "runs" : name || ""));
}

/** tell hands the newest state of its station to whatever is shown. */
function tell() {
  const live = house.view?.live;
  if (!live) return;
  live.connected = house.connected;
  const s = house.stations.get(house.view.station);
  if (s) live.set(s);
  else live.draw();
}

function connected(now) {
  if (now && !house.connected) house.failed ? route() : house.view?.load?.().catch(() => {});
  house.connected = now;
  const node = document.getElementById("connection");
  show(node, now ? "● connected" : "○ not connected: trying again");
  node.dataset.state = now ? "on" : "off";
  if (house.view?.live) { house.view.live.connected = now; house.view.live.draw(); }
}

for (const a of document.querySelectorAll('a[href="#/"]')) a.addEventListener("click", () => { if ((location.hash || "#/") === "#/") route(); });
setUpSound(document.getElementById("sound"));
try {
  if (await who()) {
    await route();
    addEventListener("hashchange", route);
    listen({
      connected,
      station: (s) => {
        connected(true);
        house.stations.set(s.name, s);
        if (house.view?.station === s.name) tell();
      },
      event: (e) => house.view?.heard?.(e),
      trouble: (t) => house.view?.live?.tell(`${t.detail} ${t.hint}`, "trouble"),
    });
  } else {
    show(page, el("div", { class: "page" }, el("h1", {}, "Sign in to work at the bench"), el("p", {}, "Everybody signs in with their own name and secret.")));
    signIn();
  }
} catch (problem) {
  show(page, el("div", { class: "page" }, el("p", { class: "problem", role: "alert" }, el("strong", {}, problem.message), " ", problem.hint || "")));
}
