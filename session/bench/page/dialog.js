// One dialog for everything that asks something first. Reasons can be chosen with a
// digit, so that a numeric keypad is enough.

import { el, show } from "/dom.js";

const box = () => document.getElementById("dialog");

/**
 * ask shows a form and resolves to its values, or to null when it was left.
 * fields: [{name, label, value, type, choices, numeric, optional}]
 */
export function ask({ title, text, fields, button, act, danger }) {
  const node = box();
  const message = el("p", { class: "problem", role: "alert", hidden: true });
  const inputs = new Map();
  const rows = fields.map((field) => row(field, inputs));
  return new Promise((resolve) => {
    const leave = (value) => { node.close(); show(node); resolve(value); };
    const submit = async (event) => {
      event.preventDefault();
      const values = {};
      for (const [name, input] of inputs) values[name] = input.value.trim();
      try {
        leave((await act(values)) ?? values);
      } catch (problem) {
        show(message, el("strong", {}, problem.message), " ", problem.hint, problem.reference && ` (reference ${problem.reference})`);
        message.hidden = false;
        [...inputs.values()].at(-1)?.focus();
      }
    };
    show(node, el("form", { onsubmit: submit },
      el("h2", { id: "dialog-title" }, title),
      text && el("p", { class: "ask" }, text),
      rows, message,
      el("div", { class: "buttons" },
        el("button", { type: "button", class: "quiet", onclick: () => leave(null) }, "Leave it"),
        el("button", { type: "submit", class: danger ? "danger" : "go" }, button))));
    node.oncancel = (event) => { event.preventDefault(); leave(null); };
    node.showModal();
    const first = [...inputs.values()][0];
    first?.focus();
    first?.select?.();
  });
}

function row(field, inputs) {
  const id = "ask-" + field.name;
  const input = el("input", {
    id, name: field.name, type: field.type || "text", value: field.value || "", autocomplete: "off",
    inputmode: field.numeric ? "decimal" : undefined, maxlength: 500,
  });
  inputs.set(field.name, input);
  const label = el("label", { for: id }, field.label);
  if (!field.choices) return el("div", { class: "field" }, label, input);
  const choices = field.choices.map((text, i) => el("button", {
    type: "button", class: "choice", onclick: () => { input.value = text; input.focus(); },
  }, el("kbd", {}, String(i + 1)), " ", text));
  input.addEventListener("keydown", (event) => {
    const text = field.choices[Number(event.key) - 1];
    if (text && input.value === "") { event.preventDefault(); input.value = text; }
  });
  return el("div", { class: "field" }, label, input, el("div", { class: "choices" }, choices));
}
