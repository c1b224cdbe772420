// Calibrating a sink beside reference meters, point by point, and the certificates there are.

import { daemon, newKey } from "../api/client.ts";
import type { Calibration, CalibrationOutcome, CertificateList, Sink } from "../api/types.ts";
import type { Bench } from "../core/bench.ts";
import { guideOf, meterValue, proposed, setpointsOf, small } from "../core/calibration.ts";
import { amperes, degrees, volts } from "../core/format.ts";
import { link } from "../core/route.ts";
import { h, reasonOf, show, write } from "../dom.ts";
import { say } from "../parts/announce.ts";
import { certificate, certificateList, verification } from "../parts/certificates.ts";
import { Fields, refusal } from "../parts/fields.ts";
import { type HoldingPart, holding } from "../parts/holding.ts";
import { sourceFields } from "../parts/source.ts";
import { statementFields } from "../parts/statement.ts";
import type { View } from "../view.ts";

const LOOK_MS = 300;
const NEW = "";
/** Long: one reads two meters and writes down what they say. */
const INTERVAL = "30 s";

export function calibrationView(): View {
  return new CalibrationPage();
}

class CalibrationPage implements View {
  readonly title = "Calibration";
  readonly element: HTMLElement;
  #sinks: readonly Sink[] = [];
  #now: Calibration | null = null;
  #hold: HoldingPart | null = null;
  #timer = 0;
  #closed = false;

  readonly #source = sourceFields("calibration-source", { kind: "supply", label: "bench supply" });
  readonly #statement = statementFields();
  readonly #points = new Fields("calibration-points", "Which points", [
    { name: "setpoints", label: "Nominal currents, commas between them", first: "" },
    { name: "makes", label: "It makes", first: NEW, options: [[NEW, "a new certificate"]] },
    { name: "identity", label: "A new one is called (bench, sink and day if empty)", first: "", optional: true },
  ]);
  readonly #begin = h("button", { type: "submit", class: "strong" }, "Hold the first point");
  readonly #refused = h("div");
  readonly #list = h("div", {}, h("p", { class: "quiet" }, "Reading the certificates …"));
  readonly #form: HTMLFormElement;

  readonly #guided = h("section", { class: "held", "aria-labelledby": "guided", hidden: true });
  readonly #guide = h("p", { class: "verdict" });
  readonly #status = h("div");
  readonly #nominal = h("p", { class: "figures" });
  readonly #current = h("input", { id: "meter-current", autocomplete: "off", placeholder: "498.6 mA" });
  readonly #voltage = h("input", { id: "meter-voltage", autocomplete: "off", placeholder: "3.702 V" });
  readonly #take = h("button", { type: "submit", class: "strong" }, "Take it");
  readonly #finish = h("button", { type: "button", class: "plain", onclick: () => void this.#finished() }, "Finish with what is taken");
  readonly #taken = h("tbody");
  readonly #table = h(
    "div",
    { class: "scroll", tabindex: 0, role: "region", "aria-label": "Points taken", hidden: true },
    h(
      "table",
      {},
      h("thead", {}, h("tr", {}, ...["Set", "Read back", "Meter", "Meter less readback", "Read back", "Meter", "Meter less readback"].map((text) => h("th", { scope: "col", class: "number" }, text)))),
      this.#taken,
    ),
  );
  readonly #outcome = h("section", { "aria-live": "polite" });

  constructor() {
    this.#form = h(
      "form",
      {
        onsubmit: (event) => {
          event.preventDefault();
          void this.#start();
        },
      },
      this.#source.element,
      this.#points.element,
      this.#statement.element,
      h("p", { class: "actions" }, this.#begin, h("span", { class: "quiet" }, "Every point is checked before anything flows.")),
    );
    const reading = h(
      "form",
      {
        class: "inline",
        onsubmit: (event) => {
          event.preventDefault();
          void this.#read();
        },
      },
      h("label", { for: "meter-current" }, "Current meter "),
      this.#current,
      h("label", { for: "meter-voltage" }, "Voltage meter "),
      this.#voltage,
      this.#take,
      this.#finish,
    );
    this.#guided.append(h("h3", { id: "guided" }, "Under way"), this.#guide, this.#status, this.#nominal, reading);
    this.element = h(
      "main",
      { id: "main", tabindex: -1 },
      h("h2", {}, "Calibration"),
      h(
        "p",
        { class: "note" },
        "The current meter goes in series, on a range above the largest setpoint: look at its fuse first. Never put a meter that is set to current across a cell or a supply: it is a short circuit. A fuse and a switch in series with the source; cut the circuit before you move a lead; heat sink and sense resistor get hot. Follow the meters' manuals, and ask a qualified person where you are not one. Leave or reload this page, or touch nothing for ten minutes, and the sink goes off.",
      ),
      this.#guided,
      this.#table,
      this.#outcome,
      this.#form,
      this.#refused,
      h("section", { "aria-labelledby": "certificates" }, h("h3", { id: "certificates" }, "Certificates"), this.#list),
    );
    this.#form.addEventListener("change", () => this.#propose());
    void this.#certificates();
  }

  update(bench: Bench): void {
    this.#sinks = bench.sinks;
    this.#source.update(bench.sinks);
    this.#propose();
  }

  close(): void {
    this.#closed = true;
    clearTimeout(this.#timer);
    this.#hold?.letGo();
    const now = this.#now;
    // One leaves: it goes off now, and not only when the interval is over.
    if (now !== null && now.state !== "finished" && now.state !== "ended") void daemon.off(now.sink).catch(() => undefined);
  }

  /** Setpoints over the range of the sink, unless others are written. */
  #propose(): void {
    const sink = this.#sinks.find(({ name }) => name === this.#source.sink);
    if (sink && this.#points.value("setpoints") === "") this.#points.set("setpoints", proposed(sink.limits.current_a));
  }

  async #certificates(): Promise<void> {
    try {
      const list: CertificateList = await daemon.certificates();
      this.#list.replaceChildren(certificateList(list));
      this.#points.offer("makes", [[NEW, "a new certificate"], ...list.certificates.map(({ identity }) => [identity, `a verification of ${identity}`] as const)]);
    } catch (error) {
      this.#list.replaceChildren(h("p", { class: "note" }, reasonOf(error)));
    }
  }

  async #start(): Promise<void> {
    this.#begin.disabled = true;
    this.#refused.replaceChildren();
    const [verifies, identity] = [this.#points.value("makes"), this.#points.value("identity")];
    const body = {
      ...this.#source.body(),
      interval: INTERVAL,
      readback: "100 ms",
      setpoints: setpointsOf(this.#points.value("setpoints")),
      statement: this.#statement.body(),
      ...(verifies !== NEW ? { verifies } : identity !== "" ? { identity } : {}),
    };
    try {
      const begun = await daemon.beginCalibration(body, newKey());
      const sink = this.#sinks.find(({ name }) => name === begun.sink);
      if (!this.#closed && sink && begun.run) {
        this.#hold = holding(begun.run, sink);
        this.#status.replaceChildren(this.#hold.element);
        this.#taken.replaceChildren();
        this.#outcome.replaceChildren();
        show(this.#form, false);
        show(this.#guided, true);
        this.#voltage.disabled = !this.#statement.withVoltage;
        this.#draw(begun);
        this.#current.focus();
        this.#look();
      }
    } catch (error) {
      this.#refused.replaceChildren(refusal("Not begun", error));
    }
    this.#begin.disabled = false;
  }

  #look(): void {
    clearTimeout(this.#timer);
    this.#timer = window.setTimeout(() => void this.#looked(), LOOK_MS);
  }

  async #looked(): Promise<void> {
    const now = this.#now;
    if (this.#closed || now === null || now.state === "finished") return;
    try {
      this.#draw(await daemon.calibration(now.id));
    } catch (error) {
      write(this.#guide, reasonOf(error));
    }
    this.#look();
  }

  #draw(next: Calibration): void {
    const before = this.#now?.state;
    this.#now = next;
    write(this.#guide, guideOf(next));
    if (next.state !== before && next.state !== "settling") say(guideOf(next));
    const why = next.run?.ending?.reason;
    if (next.state === "ended" && why) write(this.#guide, `${guideOf(next)} (${why})`);
    // Another can begin.
    show(this.#form, next.state === "ended");
    // It ends: there is nothing to be asked for any more.
    const run = next.run?.state;
    if (run === undefined || run === "ending" || run === "ended") this.#hold?.letGo();
    this.#take.disabled = next.state !== "settled";
    this.#finish.disabled = Math.max(next.current_points, next.voltage_points) === 0;
    write(this.#finish, next.state === "taken" ? "Finish" : "Finish with what is taken");
    const { nominal } = next;
    write(
      this.#nominal,
      nominal
        ? `Read back, nominal, mean of ${nominal.readbacks}: ${small(nominal.current_a, "A")} (s ${small(nominal.current_deviation_a, "A")}), ${small(nominal.voltage_v, "V")} (s ${small(nominal.voltage_deviation_v, "V")}), heat sink ${degrees(nominal.temperature_degc)}.`
        : "",
    );
  }

  async #read(): Promise<void> {
    const now = this.#now;
    if (now === null || now.state !== "settled") return;
    this.#take.disabled = true;
    this.#refused.replaceChildren();
    const [current, voltage] = [this.#current.value.trim(), this.#voltage.value.trim()];
    try {
      const next = await daemon.meterReading(now.id, { ...(current === "" ? {} : { current }), ...(voltage === "" ? {} : { voltage }) });
      this.#row(now, current, voltage);
      this.#current.value = "";
      this.#voltage.value = "";
      this.#draw(next);
      (next.state === "taken" ? this.#finish : this.#current).focus();
    } catch (error) {
      this.#refused.replaceChildren(refusal("Not taken", error));
      this.#take.disabled = false;
    }
  }

  /** A point as it was taken. */
  #row(of: Calibration, current: string, voltage: string): void {
    const { nominal } = of;
    const [amps, potential] = [meterValue(current), meterValue(voltage)];
    const less = (read: number | null, back: number | undefined, unit: "A" | "V"): string =>
      read === null || back === undefined ? "–" : small(read - back, unit);
    const cells = [
      amperes(of.setpoint_a),
      nominal ? small(nominal.current_a, "A") : "–",
      current || "–",
      less(amps, nominal?.current_a, "A"),
      nominal ? volts(nominal.voltage_v) : "–",
      voltage || "–",
      less(potential, nominal?.voltage_v, "V"),
    ];
    this.#taken.append(h("tr", {}, ...cells.map((text) => h("td", { class: "figures number" }, text))));
    show(this.#table, true);
  }

  async #finished(): Promise<void> {
    const now = this.#now;
    if (now === null) return;
    this.#refused.replaceChildren();
    try {
      const outcome = await daemon.finishCalibration(now.id);
      this.#hold?.letGo();
      this.#hold = null;
      this.#now = { ...now, state: "finished" };
      show(this.#guided, false);
      show(this.#form, true);
      this.#outcome.replaceChildren(...told(outcome));
      await this.#certificates();
    } catch (error) {
      this.#refused.replaceChildren(refusal("Not finished", error));
    }
  }
}

function told({ id, file, bench_entry, certificate: made, verification: judged }: CalibrationOutcome): HTMLElement[] {
  const record = h("p", {}, h("a", { href: link({ view: "record", id }) }, "The record of its run"), `. Written to ${file} on the daemon's host.`);
  if (judged) return [h("h3", {}, "Verified"), verification(judged), record];
  if (!made) return [record];
  const shown = certificate(made);
  shown.setAttribute("open", "");
  return [
    h("h3", {}, "The certificate"),
    shown,
    h("p", {}, "Nothing is corrected by it yet: it moves every limit, every setpoint and every reading of the sink at once. To take it into use, write this into the sink's entry of the bench file and start the daemon again:"),
    h("pre", { tabindex: 0, "aria-label": "Line for the bench file" }, bench_entry ?? ""),
    record,
  ];
}
