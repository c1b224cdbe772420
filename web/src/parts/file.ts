// A link to a file of the daemon: its report, its readbacks. Where a token is needed a link alone
// cannot send it, so the file is fetched and handed over.

import { authorized, token } from "../api/client.ts";
import { h, reasonOf } from "../dom.ts";
import { say } from "./announce.ts";

export function fileLink(text: string, path: string, name: string, opens = false): HTMLAnchorElement {
  const element = h("a", opens ? { href: path, target: "_blank", rel: "noopener" } : { href: path, download: name }, text);
  element.addEventListener("click", (event) => {
    if (token() === null) return;
    event.preventDefault();
    void fetched(path, name);
  });
  return element;
}

async function fetched(path: string, name: string): Promise<void> {
  try {
    const answer = await fetch(path, { headers: authorized() });
    if (!answer.ok) throw new Error(`the daemon answers ${answer.status}`);
    const address = URL.createObjectURL(await answer.blob());
    h("a", { href: address, download: name }).click();
    setTimeout(() => URL.revokeObjectURL(address), 60_000);
  } catch (error) {
    say(reasonOf(error), true);
  }
}
