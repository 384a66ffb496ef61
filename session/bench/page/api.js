// Calls to the daemon. A refused call throws a Problem with what happened and what to do.

export class Problem extends Error {
  constructor(document) {
    super(document.detail || "The daemon does not answer.");
    this.code = document.code || "no-answer";
    this.hint = document.hint || "";
    this.reference = document.reference || "";
    this.status = document.status || 0;
  }
}

/** operator names who acts where sign-in is off. */
export const operator = {
  get name() { return localStorage.getItem("operator") || ""; },
  set name(value) { localStorage.setItem("operator", value.trim()); },
};

export async function call(method, path, body) {
  const headers = {};
  if (operator.name) headers["X-Operator"] = operator.name;
  if (body !== undefined) headers["Content-Type"] = "application/json";
  let answer;
  try {
    answer = await fetch("/api/v1" + path, { method, headers, body: body === undefined ? undefined : JSON.stringify(body) });
  } catch {
    throw new Problem({ hint: "Check that the daemon runs. What it has acknowledged is recorded." });
  }
  const text = await answer.text();
  let data = {};
  try { data = text ? JSON.parse(text) : {}; } catch { data = { detail: text }; }
  if (!answer.ok) throw new Problem(data);
  return data;
}

/** lines fetches JSON objects, one a line. */
export async function lines(path) {
  const answer = await fetch("/api/v1" + path, { headers: operator.name ? { "X-Operator": operator.name } : {} });
  const text = await answer.text();
  if (!answer.ok) throw new Problem(JSON.parse(text));
  return text.split("\n").filter(Boolean).map((line) => JSON.parse(line));
}

export const get = (path) => call("GET", path);
export const post = (path, body) => call("POST", path, body);
export const put = (path, body) => call("PUT", path, body);
