// Where on the page one is, as the part of the address behind `#`: nothing of it goes to the
// daemon, and a link to a record can be sent to a colleague.

export type Route =
  | { view: "bench" }
  | { view: "sequence" }
  | { view: "hand" }
  | { view: "calibration" }
  | { view: "records" }
  | { view: "record"; id: string }
  | { view: "compare"; groups: Grouped[] };

/** Records under a name; without one, whoever compares them finds the groups. */
export interface Grouped {
  name: string;
  ids: string[];
}

const ID = /^[0-9a-f-]{36}$/;

export function parse(hash: string): Route {
  const [view, rest] = hash.replace(/^#?\/?/, "").split("/", 2);
  switch (view) {
    case "sequence":
    case "hand":
    case "calibration":
      return { view };
    case "records":
      return { view: "records" };
    case "record":
      return rest !== undefined && ID.test(rest) ? { view: "record", id: rest } : { view: "records" };
    case "compare": {
      const groups = (rest ?? "").split(";").map(grouped).filter(({ ids }) => ids.length > 0);
      return groups.length > 0 ? { view: "compare", groups } : { view: "records" };
    }
    default:
      return { view: "bench" };
  }
}

export function link(route: Route): string {
  switch (route.view) {
    case "bench":
      return "#/";
    case "record":
      return `#/record/${route.id}`;
    case "compare":
      return `#/compare/${route.groups.map(({ name, ids }) => (name === "" ? "" : `${encodeURIComponent(name)}:`) + ids.join(",")).join(";")}`;
    case "sequence":
    case "hand":
    case "calibration":
    case "records":
      return `#/${route.view}`;
  }
}

function grouped(text: string): Grouped {
  const [name, ids] = text.includes(":") ? text.split(":", 2) : ["", text];
  return { name: decoded(name ?? ""), ids: (ids ?? "").split(",").filter((id) => ID.test(id)) };
}

function decoded(text: string): string {
  try {
    return decodeURIComponent(text);
  } catch {
    return text;
  }
}
