// The bench in the browser: still pictures from the kernel, windows and marks drawn over them.
// Text from the kernel is only ever set as text, never as markup.

const SVG = "http://www.w3.org/2000/svg";

function make(tag, props = {}, ...children) {
  const element = document.createElement(tag);
  for (const [key, value] of Object.entries(props)) {
    if (key === "on") for (const [type, run] of Object.entries(value)) element.addEventListener(type, run);
    else if (key === "class") element.className = value;
    else if (key in element && key !== "list") element[key] = value;
    else element.setAttribute(key, value);
  }
  element.append(...children.filter((child) => child !== null && child !== undefined));
  return element;
}

function draw(tag, props) {
  const element = document.createElementNS(SVG, tag);
  for (const [key, value] of Object.entries(props)) element.setAttribute(key, value);
  return element;
}

function render({ model, el }) {
  const root = make("div", { class: "lfp-bench", role: "application", ariaLabel: "Bench" });
  el.append(root);

  const alarm = make("div", { class: "lfp-alarm", role: "alert" });
  const status = make("div", { class: "lfp-status", role: "status", ariaLive: "polite" });
  const controls = make("div", { class: "lfp-controls", role: "toolbar", ariaLabel: "Choices" });
  const stack = make("div", { class: "lfp-stack" });
  const pictures = make("div", { class: "lfp-pictures" });
  const marks = draw("svg", { class: "lfp-marks", "aria-hidden": "true" });
  const windows = make("div", { class: "lfp-windows" });
  stack.append(pictures, marks, windows);
  const table = make("div", { class: "lfp-window-table" });
  const answers = make("div", { class: "lfp-answers", ariaBusy: "false" });
  // Beside the controls, where the eye is: what was done, and what went wrong.
  const said = make("div", { class: "lfp-said" }, alarm, status);
  const side = make("div", { class: "lfp-side" }, controls, said, table, answers);
  root.append(make("div", { class: "lfp-main" }, stack, side));

  let scene = model.get("scene");
  let spans = {};       // name -> [first, last] as the hand has them, ms
  let turn = 0;         // number of the newest position
  let flying = false;   // one request on its way
  let wanted = null;    // the newest position not yet sent
  let held = null;      // what the pointer holds
  let answered = 0;

  // --- to the kernel ------------------------------------------------------------------------
  function tell(message) {
    alarm.textContent = "";
    status.textContent = "";
    if (model.comm_live === false) return lost();
    model.send(message);
    // Whatever is asked, something comes back soon; silence means that nobody is there.
    if (!["take", "grip", "hello"].includes(message.do)) {
      clearTimeout(silence);
      silence = setTimeout(lost, 8000);
    }
  }
  let silence = null;

  function lost() {
    alarm.textContent =
      "The kernel does not answer. Windows stay as they are; they were kept beside the session " +
      "file. Start the kernel again and open the session once more.";
  }

  function ask(name) {
    turn += 1;
    wanted = { do: "move", name, first: spans[name][0], last: spans[name][1], turn };
    root.dataset.wanted = turn;
    // The window is painted in its new place first; then the kernel is asked.
    if (!painting) painting = requestAnimationFrame(() => { painting = 0; setTimeout(send, 0); });
  }
  let painting = 0;

  let watchdog = null;
  function send() {
    if (flying || !wanted) return;
    flying = true;
    tell(wanted);
    wanted = null;
    clearTimeout(watchdog);
    watchdog = setTimeout(() => { if (flying) lost(); flying = false; send(); }, 8000);
  }

  // --- geometry -----------------------------------------------------------------------------
  const share = (ms) => {
    const { width, left, right, span } = scene.geometry;
    return (left + ((ms - span[0]) / (span[1] - span[0])) * (width - left - right)) / width;
  };
  const msAt = (clientX) => {
    const box = stack.getBoundingClientRect();
    const { width, left, right, span } = scene.geometry;
    const px = ((clientX - box.left) / box.width) * width;
    return span[0] + ((px - left) / (width - left - right)) * (span[1] - span[0]);
  };
  const grid = (ms) => Math.round(ms / scene.geometry.step) * scene.geometry.step;
  const shown = (ms) => String(Math.round(ms * 1000) / 1000);

  function bounded(name, first, last, moved) {
    const [low, high] = scene.geometry.bounds;
    const least = 3 * scene.geometry.step;
    if (moved === "both") {
      const length = last - first;
      first = Math.min(Math.max(first, low), high - length);
      last = first + length;
      return [grid(first), grid(last)];
    }
    // The edge that is not held stays where it is, on the grid or not.
    if (moved === "first") return [grid(Math.min(Math.max(first, low), last - least)), last];
    return [first, grid(Math.max(Math.min(last, high), first + least))];
  }

  // --- windows over the pictures --------------------------------------------------------------
  function place(name) {
    const box = windows.querySelector(`[data-window="${CSS.escape(name)}"]`);
    if (!box) return;
    const [first, last] = spans[name];
    box.style.left = `${100 * share(first)}%`;
    box.style.width = `${100 * (share(last) - share(first))}%`;
    for (const handle of box.querySelectorAll(".lfp-handle")) {
      const at = handle.dataset.edge === "first" ? first : last;
      handle.setAttribute("aria-valuenow", shown(at));
      handle.setAttribute("aria-valuetext", `${name}: ${handle.dataset.edge} edge at ${shown(at)} ms`);
    }
    for (const edge of ["first", "last"]) {
      const input = table.querySelector(`[data-window="${CSS.escape(name)}"] input[data-edge="${edge}"]`);
      if (input && document.activeElement !== input) input.value = shown(spans[name][edge === "first" ? 0 : 1]);
    }
    root.dataset[`at`] = `${name} ${shown(first)} ${shown(last)}`;
  }

  function shift(name, edge, first, last) {
    spans[name] = bounded(name, first, last, edge);
    place(name);
    ask(name);
  }

  function onKey(event, name, edge) {
    const step = scene.geometry.step;
    const by = { ArrowLeft: -1, ArrowRight: 1, ArrowDown: -1, ArrowUp: 1, PageDown: -10, PageUp: 10 }[event.key];
    if (event.shiftKey) edge = "both";
    const [first, last] = spans[name];
    if (by === undefined && event.key !== "Home" && event.key !== "End") return;
    if (edge === "both" && by === undefined) return;
    grip(name);
    if (by !== undefined) {
      const delta = by * step;
      if (edge === "both") shift(name, edge, first + delta, last + delta);
      else if (edge === "first") shift(name, edge, first + delta, last);
      else shift(name, edge, first, last + delta);
    } else {
      const [low, high] = scene.geometry.bounds;
      const to = event.key === "Home" ? low : high;
      if (edge === "first") shift(name, edge, to, last);
      else shift(name, edge, first, to);
    }
    event.preventDefault();
    event.stopPropagation();
    rest = setTimeout(() => { rest = null; letGo(); }, 400);
  }

  // A burst of keys, like a drag, is one step of undo: gripped at its start, let go at its end.
  let rest = null;
  function grip(name) {
    if (rest === null) tell({ do: "grip", name });
    clearTimeout(rest);
    rest = null;
    inHand(name);
  }

  function inHand(name) {
    scene.hand = name;
    for (const box of windows.children) box.classList.toggle("lfp-in-hand", box.dataset.window === name);
    const radio = table.querySelector(`[data-window="${CSS.escape(name)}"] input[type=radio]`);
    if (radio) radio.checked = true;
  }

  function letGo() {
    if (wanted) {
      flying = true;
      tell(wanted);
      wanted = null;
    }
    tell({ do: "settle" });
  }

  function grab(event, name, edge) {
    if (event.button !== undefined && event.button !== 0) return;
    event.preventDefault();
    event.stopPropagation();
    event.currentTarget.focus();
    held = { name, edge, from: msAt(event.clientX), first: spans[name][0], last: spans[name][1] };
    tell({ do: "grip", name });
    inHand(name);
    window.addEventListener("mousemove", follow);
    window.addEventListener("mouseup", release, { once: true });
  }

  function follow(event) {
    if (!held) return;
    const delta = msAt(event.clientX) - held.from;
    const first = held.edge === "last" ? held.first : held.first + delta;
    const last = held.edge === "first" ? held.last : held.last + delta;
    shift(held.name, held.edge, first, last);
  }

  function release() {
    window.removeEventListener("mousemove", follow);
    held = null;
    letGo();
  }

  function handle(name, edge) {
    const [low, high] = scene.geometry.bounds;
    return make("div", {
      class: "lfp-handle", tabIndex: 0, role: "slider", "data-edge": edge,
      "aria-label": `${name}, ${edge} edge`, "aria-valuemin": low, "aria-valuemax": high,
      "aria-orientation": "horizontal",
      on: {
        mousedown: (event) => grab(event, name, edge),
        keydown: (event) => onKey(event, name, edge),
      },
    });
  }

  function drawWindows() {
    const focus = document.activeElement?.closest?.("[data-window]") && document.activeElement;
    const kept = focus && root.contains(focus)
      ? [focus.closest("[data-window]").dataset.window, focus.dataset.edge, focus.className] : null;
    windows.replaceChildren(...scene.windows.map((each) => {
      const box = make("div", {
        class: each.name === scene.hand ? "lfp-window lfp-in-hand" : "lfp-window",
        "data-window": each.name,
        on: { mousedown: (event) => grab(event, each.name, "both") },
        title: `${each.name}: drag to move, drag an edge to widen`,
      }, make("span", { class: "lfp-window-name", textContent: each.name }));
      box.tabIndex = -1;
      box.append(handle(each.name, "first"), handle(each.name, "last"));
      return box;
    }));
    spans = Object.fromEntries(scene.windows.map((each) => [each.name, [each.first, each.last]]));
    for (const each of scene.windows) place(each.name);
    if (kept && kept[2] === "lfp-handle") {
      windows.querySelector(`[data-window="${CSS.escape(kept[0])}"] [data-edge="${kept[1]}"]`)?.focus();
    }
  }

  // --- the table of windows -------------------------------------------------------------------
  function number(name, edge, value) {
    return make("input", {
      type: "number", step: scene.geometry.step, value: shown(value), "data-edge": edge,
      ariaLabel: `${name}, ${edge} edge in ms`,
      on: {
        keydown: (event) => event.stopPropagation(),
        change: (event) => tell({ do: "type", name, edge, value: event.target.value }),
      },
    });
  }

  function drawTable() {
    const active = document.activeElement;
    if (active && table.contains(active) && active.tagName === "INPUT" && active.type === "text") active.blur();
    const rows = scene.windows.map((each) => make("tr", { "data-window": each.name },
      make("td", {}, make("input", {
        type: "radio", name: `hand-${model.model_id ?? ""}`, checked: each.name === scene.hand,
        ariaLabel: `take ${each.name} in hand`,
        on: { change: () => tell({ do: "take", name: each.name }) },
      })),
      make("td", {}, make("input", {
        type: "text", value: each.name, size: 9, maxLength: 40, ariaLabel: `name of ${each.name}`,
        on: {
          keydown: (event) => event.stopPropagation(),
          change: (event) => tell({ do: "rename", name: each.name, to: event.target.value }),
        },
      })),
      make("td", {}, number(each.name, "first", each.first)),
      make("td", {}, number(each.name, "last", each.last)),
      make("td", {}, choice(`wave of ${each.name}`, ["trough", "peak"], each.extremum,
        (value) => tell({ do: "extremum", name: each.name, value }))),
      make("td", {}, button("remove", `remove ${each.name}`, () => tell({ do: "remove", name: each.name }))),
    ));
    table.replaceChildren(
      make("table", {},
        make("caption", { textContent: "Windows (ms after the stimulus)" }),
        make("thead", {}, make("tr", {}, ...["hand", "name", "first", "last", "wave", ""].map((name) =>
          make("th", { textContent: name, scope: "col" })))),
        make("tbody", {}, ...rows)),
      make("div", { class: "lfp-buttons" },
        button("add", "add a window", () => tell({ do: "add" })),
        button("snap to wave", "set the window in hand around the wave found in it",
          () => tell({ do: "snap" }))),
    );
  }

  function button(text, label, run, disabled = false) {
    return make("button", { type: "button", textContent: text, title: label, ariaLabel: label, disabled,
      on: { click: run } });
  }

  function choice(label, options, value, run) {
    const select = make("select", { ariaLabel: label, on: {
      change: (event) => run(event.target.value), keydown: (event) => event.stopPropagation() } });
    for (const option of options) select.append(make("option", { value: option, textContent: option }));
    select.value = value;
    return select;
  }

  function labelled(text, control) {
    return make("label", {}, make("span", { textContent: text }), control);
  }

  function drawControls() {
    const picks = [];
    for (const [key, text] of [["condition", "condition"], ["area", "depth and units of"], ["signal", "signal"], ["unit", "unit"]]) {
      if (scene.options[key].length) {
        picks.push(labelled(text, choice(text, scene.options[key], scene.chosen[key],
          (value) => tell({ do: "show", key, value }))));
      }
    }
    controls.replaceChildren(
      make("div", { class: "lfp-title", textContent: scene.title }),
      make("div", { class: "lfp-picks" }, ...picks),
      make("div", { class: "lfp-buttons" },
        button("undo", "undo the last change of windows or choices", () => tell({ do: "undo" }), !scene.canUndo),
        button("redo", "redo what was undone", () => tell({ do: "redo" }), !scene.canRedo),
        button("save session", scene.saveHint, () => tell({ do: "save" }), !scene.canSave),
        button("tables", "write the tables as CSV files", () => tell({ do: "tables" })),
        button("figure", "write the figures as PDF, SVG and PNG", () => tell({ do: "figure" }))),
    );
  }

  // --- pictures and marks -----------------------------------------------------------------------
  const urls = [];
  function drawPictures() {
    urls.splice(0).forEach((url) => URL.revokeObjectURL(url));
    let top = 0;
    const images = scene.strips.map((strip) => {
      const data = model.get(strip.picture);
      const url = URL.createObjectURL(new Blob([data], { type: "image/png" }));
      urls.push(url);
      top += strip.height;
      return make("img", { src: url, alt: strip.alt, draggable: false,
        style: `aspect-ratio: ${scene.geometry.width} / ${strip.height}` });
    });
    pictures.replaceChildren(...images);
    marks.setAttribute("viewBox", `0 0 ${scene.geometry.width} ${top}`);
  }

  function drawMarks(latencies) {
    marks.replaceChildren();
    const { width } = scene.geometry;
    const frames = scene.strips[0]?.frames ?? [];
    for (const row of latencies ?? []) {
      const frame = frames.find((each) => each.name === row.area);
      if (!frame || row.time === null || row.amplitude === null) continue;
      const y = frame.top + ((row.amplitude - frame.topValue) / (frame.bottomValue - frame.topValue)) * (frame.bottom - frame.top);
      const x = width * share(row.time);
      if (row.lo !== null) {
        const [lo, hi] = [width * share(row.lo), width * share(row.hi)];
        marks.append(draw("path", { d: `M${lo},${y - 4}V${y + 4}M${lo},${y}H${hi}M${hi},${y - 4}V${y + 4}`, class: "lfp-bar" }));
      }
      marks.append(draw("circle", { cx: x, cy: y, r: 4.5, class: "lfp-mark" }));
    }
  }

  // --- answers ------------------------------------------------------------------------------------
  function answerTable({ caption, head, rows, old }) {
    // Notes weaken numbers: they stand below their row, where they cannot be cut off.
    const noted = head[head.length - 1] === "note";
    const columns = noted ? head.slice(0, -1) : head;
    const body = rows.flatMap((cells) => {
      const own = make("tr", {}, ...cells.slice(0, columns.length).map((cell) => make("td", {}, cell)));
      if (!noted || !cells[columns.length]) return [own];
      const note = make("td", { colSpan: columns.length, textContent: cells[columns.length] });
      return [own, make("tr", { class: "lfp-note" }, note)];
    });
    return make("table", { class: old ? "lfp-grid lfp-old" : "lfp-grid" },
      make("caption", { textContent: caption }),
      make("thead", {}, make("tr", {}, ...columns.map((name) => make("th", { textContent: name, scope: "col" })))),
      make("tbody", {}, ...body));
  }

  function folded(cell, open) {
    const details = make("details", { "data-key": cell.key, open: open.has(cell.key) },
      make("summary", { textContent: cell.text }));
    for (const line of cell.more) details.append(make("p", { textContent: line }));
    return details;
  }

  function drawAnswers(answer) {
    const open = new Set([...answers.querySelectorAll("details[open]")].map((d) => d.dataset.key));
    answers.replaceChildren(
      make("h3", { textContent: answer.heading }),
      make("p", { class: "lfp-pending", textContent: answer.pending }),
      ...answer.tables.map((table) => answerTable({ ...table, rows: table.rows.map((row) =>
        row.map((cell) => (typeof cell === "string" ? cell : folded(cell, open)))) })),
    );
    answers.classList.toggle("lfp-stale", answer.stale);
    answers.ariaBusy = String(answer.stale);
  }

  function take(message) {
    clearTimeout(silence);
    if (message.kind === "answer") {
      if (message.turn) {
        flying = false;
        clearTimeout(watchdog);
        answered = message.turn;
        root.dataset.answered = answered;
      }
      drawAnswers(message.answer);
      drawMarks(message.answer.latencies);
      root.dataset.full = String(!message.answer.stale);
      send();
    } else if (message.kind === "said") {
      status.textContent = message.text;
    } else if (message.kind === "error") {
      flying = false;
      clearTimeout(watchdog);
      alarm.textContent = message.text;
      drawWindows();
      drawTable();
      send();
    }
  }

  function whole() {
    scene = model.get("scene");
    drawControls();
    drawTable();
    drawPictures();
    drawWindows();
    root.dataset.ready = "true";
  }

  model.on("msg:custom", take);
  model.on("change:scene", () => {
    const before = scene;
    scene = model.get("scene");
    drawControls();
    if (!held) { drawTable(); drawWindows(); }
    if (before.pictureTurn !== scene.pictureTurn) drawPictures();
  });
  model.on("comm_live_update", () => { if (model.comm_live === false) lost(); });
  whole();
  tell({ do: "hello" });
  return () => urls.forEach((url) => URL.revokeObjectURL(url));
}

export default { render };
