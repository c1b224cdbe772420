// Server-sent events out of pieces of text (HTML standard, "Server-sent events"): pure, so that
// it is tested without a network. The browser's own EventSource cannot send a token.

export interface Message {
  /** The last id seen, with this event or before it. */
  id: string;
  event: string;
  data: string;
}

export class Parser {
  #rest = "";
  #id = "";
  #event = "";
  #data: string[] = [];

  /** The whole messages that a further piece of text completes. */
  take(piece: string): Message[] {
    this.#rest += piece;
    const messages: Message[] = [];
    for (;;) {
      const end = this.#rest.search(/\r\n|\n|\r(?=[^])/);
      if (end < 0) return messages;
      const line = this.#rest.slice(0, end);
      this.#rest = this.#rest.slice(end + (this.#rest.startsWith("\r\n", end) ? 2 : 1));
      const message = this.#line(line);
      if (message) messages.push(message);
    }
  }

  #line(line: string): Message | null {
    if (line === "") return this.#dispatch();
    const colon = line.indexOf(":");
    const field = colon < 0 ? line : line.slice(0, colon);
    const raw = colon < 0 ? "" : line.slice(colon + 1);
    const value = raw.startsWith(" ") ? raw.slice(1) : raw;
    if (field === "id" && !value.includes("\0")) this.#id = value;
    else if (field === "event") this.#event = value;
    else if (field === "data") this.#data.push(value);
    return null;
  }

  #dispatch(): Message | null {
    const [event, data] = [this.#event, this.#data];
    this.#event = "";
    this.#data = [];
    if (data.length === 0) return null;
    return { id: this.#id, event: event || "message", data: data.join("\n") };
  }
}
