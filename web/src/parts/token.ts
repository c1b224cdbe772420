// Asks for a token where the daemon wants one. It stays in this tab and ends with it.

import { onTokenNeeded } from "../api/client.ts";
import { h } from "../dom.ts";

export function tokenDialog(): HTMLDialogElement {
  const field = h("input", { type: "password", id: "token", autocomplete: "off", required: true });
  const form = h(
    "form",
    { method: "dialog" },
    h("h2", {}, "A token is needed"),
    h("p", {}, "This daemon wants a token of its token file: one of the scope read to look on, of operate to start, stop and turn off."),
    h("label", { for: "token" }, "Token"),
    field,
    h("p", { class: "actions" }, h("button", { type: "submit", value: "given" }, "Use it")),
  );
  const dialog = h("dialog", { "aria-label": "A token is needed" }, form);
  onTokenNeeded(
    () =>
      new Promise((resolve) => {
        dialog.returnValue = "";
        field.value = "";
        dialog.addEventListener(
          "close",
          () => resolve(dialog.returnValue === "given" ? field.value : null),
          { once: true },
        );
        dialog.showModal();
        field.focus();
      }),
  );
  return dialog;
}
