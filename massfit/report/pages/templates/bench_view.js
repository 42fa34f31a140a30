"use strict";
// The bench of the page: what is ticked becomes a scenario, its answer is shown beside that of the whole network.
(() => {
  const section = document.querySelector("section.bench");
  if (section === null) return;
  const data = JSON.parse(document.getElementById("bench-data").textContent);
  const words = JSON.parse(document.getElementById("share-words").textContent);
  const { YEAR_DAYS, integrate, regions, shares } = globalThis.massfitBench;
  const show = (name) => section.querySelector(`[data-show=${name}]`);
  const inputs = (kind) => [...section.querySelectorAll(`input[data-kind=${kind}]`)];
  const number = (kind) => Number(inputs(kind)[0].value);
  const NUMBERS = { truth: [0, 10], model_common_hpa: [0.01, 10] };
  const MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"];
  const KINDS = ["sites", "models", "members"];

  const scenarioNow = () => {
    const left = KINDS.map((kind) => [`without_${kind}`, inputs(kind).filter((i) => !i.checked).map((i) => data[kind][i.value])]);
    return { network: data.network, ...Object.fromEntries(left), truth: number("truth"), model_common_hpa: number("model_common_hpa") };
  };

  const whole = () => ({ without_sites: [], without_models: [], without_members: [], ...data.chosen });

  // what is wrong with a scenario from elsewhere; empty where nothing is
  const faults = (scenario) => {
    if (typeof scenario !== "object" || scenario === null || Array.isArray(scenario)) return ["It is no scenario."];
    const found = [];
    if (scenario.network !== undefined && scenario.network !== data.network) found.push(`It is of another network: ${scenario.network}.`);
    for (const kind of KINDS) {
      const names = scenario[`without_${kind}`] ?? [];
      if (!Array.isArray(names)) { found.push(`without_${kind} is no list.`); continue; }
      for (const name of names) if (name === null || !data[kind].includes(name)) found.push(`${kind}: there is no ${name}.`);
    }
    for (const [key, [low, high]] of Object.entries(NUMBERS)) {
      const value = scenario[key] ?? data.chosen[key];
      if (typeof value !== "number" || !(value >= low && value <= high)) found.push(`${key} must be from ${low} to ${high}.`);
    }
    return found;
  };

  const apply = (scenario) => {
    for (const kind of KINDS) {
      const gone = scenario[`without_${kind}`] ?? [];
      for (const input of inputs(kind)) input.checked = !gone.includes(data[kind][input.value]);
    }
    for (const key of Object.keys(NUMBERS)) inputs(key)[0].value = scenario[key] ?? data.chosen[key];
  };

  const date = (day) => {
    const stamp = new Date(Date.UTC(data.reference_year, 0, 1) + Math.floor(day) * 86400000);
    return `${stamp.getUTCDate()} ${MONTHS[stamp.getUTCMonth()]}`;
  };
  const dates = ([low, high]) => (high - low > 0.9 * YEAR_DAYS ? "any day of the year" : `${date(low)} to ${date(high)}`);
  const hpa = (value) => (value / 100).toFixed(3).replace("-", "\u2212");
  const span = ([low, high]) => `${hpa(low)} to ${hpa(high)}`;

  const answer = (scenario) => {
    const integrated = integrate(data, scenario);
    return integrated && { integrated, ...regions(integrated) };
  };

  const deviations = ({ integrated: { covariance } }) => [Math.sqrt(covariance[0]), Math.sqrt(covariance[2])];

  const numberRows = (base, now) => {
    const each = (spell) => [spell(base), spell(now)];
    const component = (c) => (a) => `${hpa(a.integrated.mean[c])} \u00b1 ${hpa(deviations(a)[c])}`;
    const shift = [0, 1].map((c) => (now.integrated.mean[c] - base.integrated.mean[c]) / deviations(base)[c]);
    const ratio = [0, 1].map((c) => deviations(now)[c] / deviations(base)[c]);
    const signed = (value) => `${value < 0 ? "\u2212" : "+"}${Math.abs(value).toFixed(2)}`;
    return [
      ["amplitude / hPa", ...each((a) => hpa(a.amplitude.median))],
      ["50 %", ...each((a) => span(a.amplitude.region50))],
      ["95 %", ...each((a) => span(a.amplitude.region95))],
      ["peak", ...each((a) => date(a.day.median))],
      ["50 %", ...each((a) => dates(a.day.region50))],
      ["95 %", ...each((a) => dates(a.day.region95))],
      ["in phase / hPa", ...each(component(0))],
      ["quadrature / hPa", ...each(component(1))],
      ["shift / sd, in phase and quadrature", "", shift.map(signed).join(" ")],
      ["width ratio, in phase and quadrature", "", ratio.map((value) => value.toFixed(2)).join(" ")],
    ];
  };

  const fill = (table, rows) => {
    table.tBodies[0].replaceChildren(...rows.map((row) => {
      const line = document.createElement("tr");
      line.append(...row.map((text, place) => {
        const cell = document.createElement(place ? "td" : "th");
        if (!place) cell.scope = "row";
        cell.textContent = text;
        return cell;
      }));
      return line;
    }));
  };

  const drawn = (name, attributes, text = "") => {
    const made = document.createElementNS(show("plane").namespaceURI, name);
    for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
    made.textContent = text;
    return made;
  };

  const drawPlane = (base, now) => {
    const points = [...base.contours[1], ...now.contours[1]].map(([x, y]) => [x / 100, y / 100]);
    const middle = [0, 1].map((c) => 0.5 * (Math.min(...points.map((p) => p[c])) + Math.max(...points.map((p) => p[c]))));
    const half = 0.55 * Math.max(...[0, 1].map((c) => Math.max(...points.map((p) => p[c])) - Math.min(...points.map((p) => p[c]))));
    const [left, top, side] = [52, 8, 280];
    const x = (value) => left + (side * (value - middle[0] + half)) / (2 * half);
    const y = (value) => top + (side * (middle[1] + half - value)) / (2 * half);
    const parts = [drawn("rect", { x: left, y: top, width: side, height: side, class: "frame" })];
    const step = [0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10].find((size) => (2 * half) / size <= 6) ?? 20;
    for (let k = Math.ceil((middle[0] - half) / step); k * step <= middle[0] + half; k++) {
      parts.push(drawn("line", { x1: x(k * step), x2: x(k * step), y1: top, y2: top + side, class: k ? "grid" : "zero" }));
      parts.push(drawn("text", { x: x(k * step), y: top + side + 14, "text-anchor": "middle" }, hpa(100 * k * step).replace(/0+$/, "").replace(/\.$/, "")));
    }
    for (let k = Math.ceil((middle[1] - half) / step); k * step <= middle[1] + half; k++) {
      parts.push(drawn("line", { y1: y(k * step), y2: y(k * step), x1: left, x2: left + side, class: k ? "grid" : "zero" }));
      parts.push(drawn("text", { x: left - 6, y: y(k * step) + 4, "text-anchor": "end" }, hpa(100 * k * step).replace(/0+$/, "").replace(/\.$/, "")));
    }
    parts.push(drawn("text", { x: left + side / 2, y: top + side + 32, "text-anchor": "middle" }, "in phase / hPa"));
    parts.push(drawn("text", { x: 12, y: top + side / 2, "text-anchor": "middle", transform: `rotate(-90 12 ${top + side / 2})` }, "quadrature / hPa"));
    const outline = (contour) => `${contour.map(([a, b], k) => `${k ? "L" : "M"}${x(a / 100).toFixed(1)} ${y(b / 100).toFixed(1)}`).join("")}Z`;
    for (const [each, name] of [[base, "base"], [now, "now"]]) {
      for (const contour of [...each.contours].reverse()) parts.push(drawn("path", { d: outline(contour), class: name }));
      const [a, b] = each.integrated.mean.map((value) => value / 100);
      parts.push(drawn("path", { d: `M${x(a) - 5} ${y(b)}h10M${x(a)} ${y(b) - 5}v10`, class: `${name} centre` }));
    }
    const below = top + side + 52;
    parts.push(drawn("path", { d: `M${left} ${below - 4}h22`, class: "now" }), drawn("text", { x: left + 28, y: below }, "scenario"));
    parts.push(drawn("path", { d: `M${left + 110} ${below - 4}h22`, class: "base" }), drawn("text", { x: left + 138, y: below }, "all ticked"));
    show("plane").replaceChildren(...parts);
    show("plane").setAttribute("aria-label", `The answer in the plane of in phase and quadrature: ${show("sentence").textContent}`);
  };

  let base = null;
  let turn = 0;

  const update = () => {
    const trouble = faults(scenarioNow()).filter((text) => text.includes("must be"));
    show("trouble").textContent = trouble.join(" ");
    if (trouble.length) return;
    const scenario = scenarioNow();
    base ??= answer(whole());
    const started = performance.now();
    const now = answer(scenario);
    if (now === null) {
      ++turn;
      show("sentence").textContent = "Nothing is left to answer from: tick a site, a model and a load member.";
      for (const name of ["numbers", "shares"]) show(name).tBodies[0].replaceChildren();
      show("plane").replaceChildren();
      return;
    }
    const kept = now.integrated.model.kept.length;
    show("sentence").textContent =
      `Scenario: amplitude ${hpa(now.amplitude.median)} hPa (95 %: ${span(now.amplitude.region95)}), peak on ${date(now.day.median)} ` +
      `(95 %: ${dates(now.day.region95)}), from ${kept} of ${data.sites.length} sites.`;
    fill(show("numbers"), numberRows(base, now));
    drawPlane(base, now);
    const link = `#try=${encodeURIComponent(JSON.stringify(scenario))}`;
    show("link").setAttribute("href", link);
    Object.assign(section.dataset, {
      milliseconds: performance.now() - started, inPhase: now.integrated.mean[0] / 100, quadrature: now.integrated.mean[1] / 100,
      covariance: JSON.stringify(now.integrated.covariance.map((value) => value / 1e4)),
    });
    const mine = ++turn;
    delete section.dataset.shares;
    setTimeout(() => {
      if (mine !== turn) return;
      base.shares ??= shares(base.integrated);
      const split = shares(now.integrated);
      const spell = (value) => (value ? `${(100 * value).toFixed(1)} %` : "not in the model");
      const order = Object.keys(base.shares).sort((a, b) => base.shares[b] - base.shares[a]);
      fill(show("shares"), order.map((name) => [words[name] ?? name, spell(base.shares[name]), spell(split[name])]));
      section.dataset.shares = JSON.stringify(split);
    }, 0);
  };

  const open = (text) => {
    let scenario = null;
    try { scenario = JSON.parse(text); } catch { scenario = null; }
    const trouble = faults(scenario);
    if (!trouble.length) { apply(scenario); update(); }
    else { begin(); show("trouble").textContent = `The scenario was not opened. ${trouble.join(" ")}`; }
  };

  const fromAddress = () => {
    const found = location.hash.match(/^#try=(.*)$/);
    if (!found) return;
    let text = "";
    try { text = decodeURIComponent(found[1]); } catch { text = ""; }
    open(text);
    section.scrollIntoView();
  };

  let begun = false;
  const begin = () => { if (!begun) { begun = true; update(); } };

  section.hidden = false;
  document.querySelector(".unscripted").remove();
  section.querySelector("form").addEventListener("change", () => { begun = true; update(); });
  section.querySelector("form").addEventListener("submit", (event) => event.preventDefault());
  section.querySelector("[data-do=reset]").addEventListener("click", () => { apply(whole()); update(); });
  section.querySelector("[data-do=none]").addEventListener("click", () => {
    for (const input of inputs("sites")) input.checked = false;
    update();
  });
  section.querySelector("[data-do=save]").addEventListener("click", () => {
    const link = document.createElement("a");
    link.href = URL.createObjectURL(new Blob([`${JSON.stringify(scenarioNow(), null, 2)}\n`], { type: "application/json" }));
    link.download = "scenario.json";
    link.click();
    setTimeout(() => URL.revokeObjectURL(link.href), 10000);
  });
  section.querySelector("[data-do=open]").addEventListener("change", async (event) => {
    const [file] = event.target.files;
    if (file) open(await file.text());
    event.target.value = "";
  });
  addEventListener("hashchange", fromAddress);
  // not before it is looked at: the page paints first
  new IntersectionObserver((entries) => { if (entries.some((entry) => entry.isIntersecting)) begin(); }, { rootMargin: "300px" }).observe(section);
  fromAddress();
})();
