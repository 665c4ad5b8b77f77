"use strict";
(() => {
  const data = JSON.parse(document.getElementById("data").textContent);
  const panel = document.getElementById("panel");
  const root = document.documentElement;
  const SVG = "http://www.w3.org/2000/svg";

  // Whatever users named is set as text; nothing here is ever parsed as markup.
  const fill = (element, attributes, children) => {
    for (const [name, value] of Object.entries(attributes)) element.setAttribute(name, value);
    element.append(...children.filter((child) => child !== null && child !== ""));
    return element;
  };
  const make = (tag, attributes = {}, ...children) => fill(document.createElement(tag), attributes, children);
  const draw = (tag, attributes = {}, ...children) => fill(document.createElementNS(SVG, tag), attributes, children);
  const word = (x, y, text, anchor = "middle", kind = "tick") =>
    draw("text", { x, y, "text-anchor": anchor, class: kind }, String(text));
  const short = (value) => String(Number(value.toPrecision(3)));

  // Round numbers from 0 on, about `count` of them.
  const ticks = (most, count) => {
    const rough = most / count;
    const power = 10 ** Math.floor(Math.log10(rough));
    const step = [1, 2, 5, 10].map((part) => part * power).find((one) => one >= rough) || rough;
    return Array.from({ length: Math.floor(most / step + 1e-9) + 1 }, (_, k) => Number((k * step).toPrecision(6)));
  };

  const axis = (picture, x, most, y, left, right, label) => {
    picture.append(draw("path", { class: "base", d: `M${left} ${y}H${right}` }));
    for (const at of ticks(most, 6)) {
      if (x(at) <= right) picture.append(draw("path", { class: "base", d: `M${x(at)} ${y}v4` }), word(x(at), y + 17, at));
    }
    picture.append(word(right, y + 32, label, "end"));
  };

  const spread = (one, exact, wide) => {
    const { below, limit, width, counts, endless } = one.bins;
    const left = 6, right = endless ? wide - 60 : wide - 12, foot = exact ? 46 : 104, high = exact ? 18 : 66;
    const edge = (k) => (k < below ? (limit * k) / below : limit + (k - below) * width);
    const most = edge(counts.length);
    const x = (value) => left + (Math.min(value, most) / most) * (right - left);
    const known = one.limit === null ? "" : `, at most ${one.limit} ${one.unit}`;
    const median = one.median[0] === null ? "did not finish" : `${short(one.median[0])} ${one.unit}`;
    const label = `${one.title}: ${exact ? "" : "median "}${median}${known}`;
    const picture = draw("svg", { viewBox: `0 0 ${wide} ${foot + 36}`, role: "img", "aria-label": label });
    const tallest = Math.max(...counts, 1);
    if (!exact) counts.forEach((count, k) => {
      if (!count) return;
      const from = x(edge(k)), to = x(edge(k + 1)), tall = (high * count) / tallest;
      const missed = one.limit !== null && k >= below;
      picture.append(draw("rect", { class: missed ? "missed" : "kept", x: from + 0.5, width: Math.max(to - from - 1, 1), y: foot - tall, height: tall },
        draw("title", {}, `${short(edge(k))} to ${short(edge(k + 1))} ${one.unit}: ${count}`)));
    });
    if (endless && !exact) picture.append(word(wide - 26, foot - 16, endless, "middle", ""), word(wide - 4, foot - 2, "no end", "end"));
    axis(picture, x, most, foot, left, right, one.unit);
    if (one.limit !== null) {
      const side = x(one.limit) > wide - 130 ? ["end", -5] : ["start", 5];
      picture.append(draw("path", { class: "limit", d: `M${x(one.limit)} 4V${foot}` }),
        word(x(one.limit) + side[1], 13, `at most ${one.limit}`, side[0], "limit-name"));
    }
    const [middle, low, up] = one.median;
    if (middle !== null) {
      const y = exact ? foot - 12 : foot - high - 10;
      if (!exact && low !== null) picture.append(draw("path", { class: "middle", d: `M${x(low)} ${y}H${up === null ? right : x(up)}` }));
      picture.append(draw("circle", { class: "middle-dot", cx: x(middle), cy: y, r: 4 }));
    }
    return make("div", {}, make("h4", {}, one.title), picture,
      exact ? null : make("p", { class: "meta" }, "Dot and bar: median with its 95 % interval.",
        one.limit === null ? "" : " Filled: draws within the limit; hollow: beyond it.",
        endless ? ` ${endless} did not finish.` : ""));
  };

  const traces = (runs, unitLimit, wide) => {
    const shown = runs.filter((run) => run.trace && run.trace.error_mm.length);
    if (!shown.length) return null;
    const left = 44, right = wide - 12, top = 12, foot = 150;
    const whole = Math.max(...shown.map((run) => Math.max(run.trace.whole_s, run.trace.seconds)));
    let most = Math.max(...shown.flatMap((run) => run.trace.error_mm), 1e-9) * 1.08;
    if (unitLimit !== null && unitLimit < 3 * most) most = Math.max(most, 1.15 * unitLimit);
    const x = (t) => left + (t / whole) * (right - left);
    const y = (value) => foot - (value / most) * (foot - top);
    const picture = draw("svg", { viewBox: `0 0 ${wide} 186`, role: "img", "aria-label": `Tool error over time: ${shown.map((run) => `${run.kind} run, ${run.ended}`).join("; ")}` });
    for (const [from, to] of shown[0].trace.rests) picture.append(draw("rect", { class: "rest", x: x(from), y: top, width: Math.max(x(to) - x(from), 0), height: foot - top }));
    for (const at of ticks(most, 4)) picture.append(draw("path", { class: "grid", d: `M${left} ${y(at)}H${right}` }), word(left - 6, y(at) + 4, at, "end"));
    axis(picture, x, whole, foot, left, right, "s");
    const limited = unitLimit !== null && unitLimit <= most;
    if (limited) picture.append(draw("path", { class: "limit", d: `M${left} ${y(unitLimit)}H${right}` }));
    shown.forEach((run) => {
      const { error_mm: error, seconds, whole_s: planned } = run.trace;
      const step = seconds / error.length;
      const points = error.map((value, k) => `${x((k + 0.5) * step).toFixed(1)},${y(value).toFixed(1)}`).join(" ");
      picture.append(draw("polyline", { class: run.kind === "median" ? "run-1" : "run-0", points }));
      if (seconds < 0.99 * planned) picture.append(draw("path", { class: "ended", d: `M${x(seconds)} ${top}V${foot}` }));
    });
    if (limited) picture.append(word(left + 5, y(unitLimit) - 5, `at most ${unitLimit}`, "start", "limit-name"));
    const key = draw("svg", { viewBox: `0 0 ${wide} 20`, "aria-hidden": "true" });
    shown.forEach((run, k) => key.append(draw("path", { class: run.kind === "median" ? "run-1" : "run-0", d: `M${left + 130 * k} 10h26` }), word(left + 33 + 130 * k, 14, `${run.kind} run`, "start")));
    return make("div", {}, make("h4", {}, "Tool error [mm] over time"), key, picture,
      make("p", { class: "meta" }, "Replayed from the store; each point is the largest of its stretch of time. Shaded: rests."));
  };

  const departures = (run) => make("table", { class: "plain" },
    make("caption", {}, `Drawn values that depart most (of -1 to 1, and what that makes)`),
    make("thead", {}, make("tr", {}, make("th", { scope: "col" }, "Parameter"), make("th", { scope: "col" }, "u"), make("th", { scope: "col" }, "Departure"))),
    make("tbody", {}, ...run.departures.map(([name, u, amount]) => make("tr", {}, make("th", { scope: "row" }, name),
      make("td", {}, u.toFixed(2).replace("-", "\u2212")), make("td", {}, amount)))));

  const oneRun = (run) => {
    const kind = { worst: "Worst run", median: "Median run", only: "The run" }[run.kind];
    const draw_ = run.draw === null ? "" : `, draw ${run.draw}`;
    return make("div", { class: `${run.kind}-run` }, make("h4", {}, `${kind}${draw_}: ${run.ended}`),
      make("p", { class: "meta" }, `${run.motion}; run ${run.key.slice(0, 12)}${run.case ? `; case: ${run.case}` : ""}`),
      run.departures.length ? departures(run) : null,
      run.note ? make("p", { class: "meta" }, run.note) : null,
      run.trace === null ? make("p", { class: "meta" }, "Not replayed for this report; --traces N sets how many are.") : null,
      run.trace && run.trace.note ? make("p", { class: "meta" }, run.trace.note) : null,
      make("pre", { tabindex: "0", "aria-label": "The command that replays this run" }, make("code", {}, run.command)));
  };

  const scores = (part, many, exact) => {
    const heads = exact ? ["Score", "Value", "Limit"] : ["Score", "Median (95 % interval)", "95th percentile", "Limit"];
    return make("table", { class: "plain" }, make("caption", { class: many ? "" : "unseen" }, part.motion),
      make("thead", {}, make("tr", {}, ...heads.map((head) => make("th", { scope: "col" }, head)))),
      make("tbody", {}, ...part.rows.map(([name, unit, median, p95, limit]) => make("tr", {},
        make("th", { scope: "row" }, unit ? `${name} [${unit}]` : name),
        ...(exact ? [median, limit] : [median, p95, limit]).map((text) => make("td", {}, text))))));
  };

  const trouble = (one) => make("div", {}, make("p", {}, `${one.said}${one.reason ? `: ${one.reason}` : ""}`),
    one.traceback === null ? null : make("pre", { tabindex: "0", "aria-label": "Traceback" }, make("code", {}, data.tracebacks[one.traceback])));

  const printed = (command) => make("p", { class: "printed" }, "Printed by ", make("code", {}, command));

  const group = (title, ...parts) => (parts.some((part) => part) ? [make("h3", {}, title), ...parts.filter((part) => part)] : []);

  const detail = (cell, wide) => {
    const limit = cell.spreads.find((one) => one.limit !== null && one.title.startsWith("tool peak"));
    return make("div", { class: "detail" },
      ...cell.said.map((said) => make("p", { class: "said" }, said)),
      ...group(cell.exact ? "Against the limits" : "How the draws spread", ...cell.spreads.map((one) => spread(one, cell.exact, wide)), cell.spreads.length ? printed(data.commands.draws) : null),
      ...group("Runs worth a look", traces(cell.runs, limit ? limit.limit : null, wide), ...cell.runs.map(oneRun)),
      ...group("Scores", ...cell.scores.map((part) => scores(part, cell.scores.length > 1, cell.exact)), cell.scores.length ? printed(data.commands.scores) : null),
      ...group("Runs that did not finish, or came to nothing", ...cell.troubles.map(trouble)));
  };

  const name = (cell) => `${cell.law}, ${cell.condition}${cell.sheet ? ` (${cell.sheet})` : ""}`;

  let opener = null;
  const close = () => {
    if (panel.hidden) return;
    panel.hidden = true;
    document.body.classList.remove("beside");
    if (opener) { opener.setAttribute("aria-expanded", "false"); opener.focus(); }
    opener = null;
  };
  const open = (button) => {
    const cell = data.cells[Number(button.dataset.cell)];
    if (opener) opener.setAttribute("aria-expanded", "false");
    opener = button;
    const title = make("h2", { id: "panel-title", tabindex: "-1" }, name(cell), cell.verdict ? `: ${cell.verdict}` : "");
    const shut = make("button", { type: "button", class: "close" }, "Close");
    shut.addEventListener("click", close);
    panel.replaceChildren(make("div", { class: "panel-head" }, title, shut), detail(cell, Math.max(300, Math.min(560, root.clientWidth - 32))));
    panel.hidden = false;
    panel.scrollTop = 0;
    button.setAttribute("aria-expanded", "true");
    document.body.classList.add("beside");
    title.focus();
  };

  document.addEventListener("click", (event) => {
    const button = event.target.closest("button[data-cell]");
    if (button) open(button);
  });

  const reach = (button) => {
    for (const other of button.closest("table").querySelectorAll(".cell")) other.tabIndex = -1;
    button.tabIndex = 0;
  };
  document.addEventListener("focusin", (event) => {
    if (event.target.matches(".cell")) reach(event.target);
  });
  document.addEventListener("keydown", (event) => {
    if (event.key === "Escape") close();
    if (!event.target.matches(".cell") || event.ctrlKey || event.altKey || event.metaKey) return;
    const [down, right] = { ArrowDown: [1, 0], ArrowUp: [-1, 0], ArrowRight: [0, 1], ArrowLeft: [0, -1] }[event.key] || [0, 0];
    if (!down && !right && event.key !== "Home" && event.key !== "End") return;
    event.preventDefault();
    const place = event.target.closest("td"), rows = [...place.closest("tbody").rows];
    let row = rows.indexOf(place.parentElement), column = place.cellIndex, found = null;
    if (event.key === "Home") found = place.parentElement.querySelector(".cell");
    else if (event.key === "End") found = [...place.parentElement.querySelectorAll(".cell")].pop();
    else while (!found && rows[row += down] && rows[row].cells[column += right]) found = rows[row].cells[column].querySelector(".cell");
    if (found) found.focus();
  });

  const theme = document.getElementById("theme");
  const dark = window.matchMedia("(prefers-color-scheme: dark)");
  const isDark = () => (root.dataset.theme ? root.dataset.theme === "dark" : dark.matches);
  const tell = () => theme.setAttribute("aria-pressed", String(isDark()));
  theme.hidden = false;
  theme.addEventListener("click", () => { root.dataset.theme = isDark() ? "light" : "dark"; tell(); });
  dark.addEventListener("change", tell);
  tell();

  // On paper the cells that decide stand with their details at the end, and what is folded is open.
  const deciding = document.getElementById("deciding");
  for (const number of new Set(data.deciding)) {
    const cell = data.cells[number];
    if (cell.law) deciding.append(make("article", {}, make("h3", {}, name(cell), cell.verdict ? `: ${cell.verdict}` : ""), detail(cell, 380)));
  }
  deciding.hidden = !data.deciding.length;
  window.addEventListener("beforeprint", () => {
    for (const folded of document.querySelectorAll("details")) folded.open = true;
  });
})();
