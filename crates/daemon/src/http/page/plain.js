"use strict";
const byId = (id) => document.getElementById(id);
const say = (text) => { byId("said").textContent = text; };
const token = () => sessionStorage.getItem("token");
async function ask(method, path) {
  const headers = token() ? { Authorization: "Bearer " + token() } : {};
  const answer = await fetch(path, { method, headers });
  if (answer.status === 401) {
    const given = prompt("Token");
    if (given) { sessionStorage.setItem("token", given.trim()); return ask(method, path); }
  }
  const body = await answer.json();
  if (!answer.ok) throw new Error(body.detail || answer.statusText);
  return body;
}
async function off(path) {
  say("Off ...");
  try {
    const answer = await ask("POST", path);
    const sinks = answer.sinks || [answer];
    say(sinks.map((s) => s.sink + (s.acknowledged ? " is off" : ": " + s.detail)).join("; "));
  } catch (error) { say(String(error.message || error)); }
}
const unit = (value, digits, name) => value === null || value === undefined ? "" : value.toFixed(digits) + " " + name;
function row(sink) {
  const tr = document.createElement("tr");
  const cell = (text) => { const td = document.createElement("td"); td.textContent = text; tr.append(td); };
  const reading = sink.reading || {};
  const run = sink.run;
  const margin = run && run.margins[0];
  cell(sink.name);
  cell(sink.link.state + (sink.link.reason ? ": " + sink.link.reason : ""));
  cell(unit(reading.voltage_v, 3, "V"));
  cell(unit(reading.current_a, 3, "A"));
  cell(reading.sensor_fault ? "sensor " + reading.sensor_fault : unit(reading.temperature_degc, 1, "\u00b0C"));
  cell(run ? run.dut + ", " + run.state + (run.step && run.step.label ? " (" + run.step.label + ")" : "") + ", " + unit(run.charge_ah, 4, "Ah") : "");
  cell(margin ? margin.interlock.replaceAll("_", " ") + " " + Math.round(margin.nearness * 100) + " %" : "");
  const td = document.createElement("td");
  const button = document.createElement("button");
  button.type = "button";
  button.textContent = "Off";
  button.setAttribute("aria-label", "Off: " + sink.name);
  button.onclick = () => off("/v1/sinks/" + encodeURIComponent(sink.name) + "/off");
  td.append(button);
  tr.append(td);
  return tr;
}
async function refresh() {
  try {
    const list = await ask("GET", "/v1/sinks");
    byId("bench").textContent = list.bench;
    const table = byId("sinks");
    const focused = document.activeElement && document.activeElement.getAttribute("aria-label");
    table.replaceChildren(...list.sinks.map(row));
    if (focused) table.querySelector('[aria-label="' + CSS.escape(focused) + '"]')?.focus();
  } catch (error) { say("No answer from the daemon: " + (error.message || error)); }
  setTimeout(refresh, 1000);
}
byId("all").onclick = () => off("/v1/off");
refresh();
