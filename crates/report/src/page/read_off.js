// Read-off of the plots: a hairline with the values at the pointer, or by arrow keys on the
// slider. Everything on the page is there without it.
"use strict";
(() => {
  const two = (number) => String(number).padStart(2, "0");
  const clock = (seconds) => {
    const tenths = Math.round(seconds * 10);
    const whole = Math.floor(tenths / 10);
    return Math.floor(whole / 3600) + ":" + two(Math.floor(whole / 60) % 60) + ":" +
      two(whole % 60) + "." + (tenths % 10);
  };
  const shown = (value, unit) => {
    if ((unit === "A" || unit === "V") && Math.abs(value) < 1) {
      return (value * 1000).toFixed(1) + "\u202fm" + unit;
    }
    return value.toFixed(unit === "°C" ? 2 : 4) + "\u202f" + unit;
  };
  const numbers = (text) => text.trim().split(/\s+/).map(Number);

  for (const figure of document.querySelectorAll("figure.plot")) {
    const traces = JSON.parse(figure.querySelector("script").textContent).traces;
    const longest = traces.reduce((a, b) => (b.x.length > a.x.length ? b : a));
    if (longest.x.length < 2) continue;
    const drawings = [...figure.querySelectorAll("svg")].map((svg) => {
      const group = svg.querySelector(".read-off");
      const [min, max, from, to] = numbers(group.dataset.x);
      const y = numbers(group.dataset.y);
      const hair = group.querySelector(".hair");
      const points = [...group.querySelectorAll(".point")].map((point, index) => {
        const [least, largest, bottom, top] = y.slice(index * 4, index * 4 + 4);
        return { point, min: least, max: largest, from: bottom, to: top };
      });
      return { svg, group, hair, points, min, max, from, to };
    });

    const slider = document.createElement("input");
    slider.type = "range";
    slider.min = "0";
    slider.max = String(longest.x.length - 1);
    slider.value = "0";
    slider.setAttribute("aria-label", "Read off the plot: arrow keys move along the axis");
    const reading = document.createElement("output");
    reading.className = "reading";
    figure.querySelector("figcaption").before(slider, reading);

    const nearest = (xs, x) => {
      let low = 0;
      let high = xs.length - 1;
      while (high - low > 1) {
        const middle = (low + high) >> 1;
        if (xs[middle] <= x) low = middle; else high = middle;
      }
      return Math.abs(xs[low] - x) <= Math.abs(xs[high] - x) ? low : high;
    };
    const show = (index) => {
      const x = longest.x[index];
      slider.value = String(index);
      const parts = [figure.dataset.kind === "time" ? clock(x) : shown(x, "Ah")];
      const values = traces.map((trace) => {
        const at = nearest(trace.x, x);
        const [low, mean, high] = [trace.low[at], trace.mean[at], trace.high[at]];
        if (mean === undefined) return undefined;
        let text = trace.name + " " + shown(mean, trace.unit);
        if (high > low) {
          text += " (" + shown(low, trace.unit) + " to " + shown(high, trace.unit) + ")";
        }
        parts.push(text);
        return mean;
      });
      reading.replaceChildren(...parts.map((part) => {
        const span = document.createElement("span");
        span.textContent = part;
        return span;
      }));
      slider.setAttribute("aria-valuetext", parts.join(", "));
      for (const { group, hair, points, min, max, from, to } of drawings) {
        const place = from + ((x - min) / (max - min)) * (to - from);
        hair.setAttribute("x1", place);
        hair.setAttribute("x2", place);
        hair.setAttribute("y1", points[0].to);
        hair.setAttribute("y2", points[points.length - 1].from);
        let field = 0;
        for (const value of values) {
          if (value === undefined || field >= points.length) continue;
          const one = points[field++];
          one.point.setAttribute("cx", place);
          one.point.setAttribute(
            "cy", one.from + ((value - one.min) / (one.max - one.min)) * (one.to - one.from));
        }
        group.removeAttribute("display");
      }
    };
    slider.addEventListener("input", () => show(Number(slider.value)));
    for (const { svg, min, max, from, to } of drawings) {
      const follow = (event) => {
        const box = svg.getBoundingClientRect();
        const place = ((event.clientX - box.left) / box.width) * svg.viewBox.baseVal.width;
        show(nearest(longest.x, min + ((place - from) / (to - from)) * (max - min)));
      };
      svg.addEventListener("pointermove", follow);
      svg.addEventListener("pointerdown", follow);
    }
  }

  // Browsers that do not open folded text on paper by style alone.
  let folded = [];
  addEventListener("beforeprint", () => {
    folded = [...document.querySelectorAll("details:not([open])")];
    for (const one of folded) one.open = true;
  });
  addEventListener("afterprint", () => {
    for (const one of folded) one.open = false;
  });
})();
