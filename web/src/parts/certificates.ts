// Certificates of calibration: which there are, whether they hold, how they have moved.

import type { Certificate, CertificateList, Verification } from "../api/types.ts";
import { driftOf, lineOf, validityOf } from "../core/calibration.ts";
import { day, fixed, significant } from "../core/format.ts";
import { h } from "../dom.ts";

export function certificateList({ certificates, troubles }: CertificateList): HTMLElement {
  return h(
    "div",
    {},
    certificates.length === 0 && h("p", { class: "quiet" }, "There is none beside the bench file: every figure says nominal, uncalibrated."),
    h("ul", { class: "certificates" }, ...[...certificates].reverse().map((one) => h("li", {}, certificate(one)))),
    ...troubles.map((trouble) => h("p", { class: "note" }, trouble)),
  );
}

export function certificate(one: Certificate): HTMLElement {
  const verified = one.verifications.at(-1);
  return h(
    "details",
    { class: "certificate" },
    h(
      "summary",
      {},
      h("strong", {}, one.identity),
      ` of ${one.sink}: `,
      h("span", { "data-validity": one.validity }, validityOf(one)),
      `, until ${day(new Date(one.valid_until))}`,
      verified !== undefined && `; verified ${day(new Date(verified.at))}, ${verified.passed ? "passed" : "failed"}`,
    ),
    h("p", {}, `Issued ${day(new Date(one.issued))} by ${one.operator}, with ${one.meters.join(" and ")}.`),
    lines(one),
    h("p", {}, `Drift since the one before: ${driftOf(one)}.`),
    ...one.verifications.map(verification),
  );
}

/** Its three lines. */
export function lines({ lines }: Certificate): HTMLElement {
  const head = ["Channel", "True at nominal zero, ± u", "Slope, ± u", "Largest residual", "From – to", "Points"];
  return scroll(
    "Lines of the certificate",
    h(
      "table",
      {},
      h("thead", {}, h("tr", {}, ...head.map((text) => h("th", { scope: "col" }, text)))),
      h(
        "tbody",
        {},
        ...lines.map((line) => {
          const { offset, slope, residual, range, note } = lineOf(line);
          return h(
            "tr",
            {},
            h("th", { scope: "row" }, line.channel),
            ...[offset, slope, residual, range].map((text) => h("td", { class: "figures" }, text)),
            h("td", {}, String(line.points), note !== "" && h("span", { class: "reason" }, note)),
          );
        }),
      ),
    ),
  );
}

/** A verification with every point's E_n. */
export function verification(one: Verification): HTMLElement {
  const head = ["Channel", "Nominal", "Corrected", "Reference", "Eₙ", "Verdict"];
  return h(
    "div",
    {},
    h("p", {}, `Verified ${day(new Date(one.at))} by ${one.operator}: `, h("strong", {}, one.passed ? "passed" : "failed"), ". A point passes where |Eₙ| ≤ 1 (ISO/IEC 17043); with the meter of the calibration itself, an error of that meter stays hidden."),
    scroll(
      "Points of the verification",
      h(
        "table",
        {},
        h("thead", {}, h("tr", {}, ...head.map((text) => h("th", { scope: "col" }, text)))),
        h(
          "tbody",
          {},
          ...one.points.map((point) =>
            h(
              "tr",
              {},
              h("th", { scope: "row" }, point.channel),
              ...[point.nominal, point.corrected, point.reference].map((value) => h("td", { class: "figures" }, `${significant(value, 5)}\u00a0${point.unit}`)),
              h("td", { class: "figures" }, fixed(point.normalised_error, 2)),
              h("td", {}, point.passed ? "passed" : h("strong", {}, "failed")),
            ),
          ),
        ),
      ),
    ),
  );
}

const scroll = (name: string, table: HTMLElement): HTMLElement =>
  h("div", { class: "scroll", tabindex: 0, role: "region", "aria-label": name }, table);
