// Where on the page one is, as the part of the address behind `#`: nothing of it goes to the
// daemon, and a link to a record can be sent to a colleague.

export type Route =
  | { view: "bench" }
  | { view: "sequence" }
  | { view: "records" }
  | { view: "record"; id: string }
  | { view: "compare"; ids: string[] };

const ID = /^[0-9a-f-]{36}$/;

export function parse(hash: string): Route {
  const [view, rest] = hash.replace(/^#?\/?/, "").split("/", 2);
  switch (view) {
    case "sequence":
      return { view: "sequence" };
    case "records":
      return { view: "records" };
    case "record":
      return rest !== undefined && ID.test(rest) ? { view: "record", id: rest } : { view: "records" };
    case "compare": {
      const ids = (rest ?? "").split(",").filter((id) => ID.test(id));
      return ids.length > 0 ? { view: "compare", ids } : { view: "records" };
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
      return `#/compare/${route.ids.join(",")}`;
    case "sequence":
    case "records":
      return `#/${route.view}`;
  }
}
