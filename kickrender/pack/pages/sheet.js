"use strict";
(() => {
  const data = JSON.parse(document.getElementById("data").textContent);
  const PAGE = 50; // rows that stand in the document at a time, so that 5,000 hits stay as quick as 50
  const MOST_CHOICES = 12; // an axis with more values is filtered by a range

  const at = (id) => document.getElementById(id);
  const make = (tag, values = {}, ...inside) => {
    const element = Object.assign(document.createElement(tag), values);
    element.append(...inside);
    return element;
  };
  const attributes = (element, values) => {
    for (const [name, value] of Object.entries(values)) element.setAttribute(name, value);
    return element;
  };
  const say = (text) => { at("status").textContent = text; };
  const count = (n, what) => `${n.toLocaleString("en")} ${what}${n === 1 ? "" : "s"}`;

  // ---- what there is: every column answers `sort(hit)`, null when the hit has no such value, and `text(hit)` ----

  const number = (value, digits) => value.toFixed(digits).replace(/^-(?=0(\.0*)?$)/, "").replace("-", "\u2212");
  const columns = [
    { key: "name", label: "Hit", unit: "", words: true, sort: (i) => i, shown: true },
    ...data.axes.map((axis) => ({
      key: `axis ${axis.name}`, label: axis.name, unit: "set", words: axis.words, axis, shown: axis.shown,
      sort: (i) => (axis.at[i] < 0 ? null : axis.at[i]), // values stand in order, so their places do too
      text: (i) => (axis.at[i] < 0 ? "" : axis.labels[axis.at[i]]),
    })),
    ...data.measures.map((measure) => ({
      key: measure.key, label: measure.label, unit: measure.unit, words: false, shown: measure.shown,
      sort: (i) => measure.values[i],
      text: (i) => measure.texts ? measure.texts[i] : measure.values[i] === null ? "" : number(measure.values[i], measure.digits),
    })),
  ];
  const byKey = new Map(columns.map((column) => [column.key, column]));
  const total = data.names.length;
  const haystacks = data.names.map((name, i) => [
    name, ...columns.filter((c) => c.axis).map((c) => `${c.label} ${c.text(i)}`), ...data.searched.map((texts) => texts[i]),
  ].join("\n").toLowerCase());
  const pictures = Uint8Array.from(atob(data.pictures), (c) => c.charCodeAt(0));

  // ---- what is looked at ----

  let sortedBy = "name";
  let descending = false;
  let listed = data.names.map((_, i) => i); // hits that fit, in order
  let place = 0; // of the current hit in `listed`
  const filters = new Map(); // axis -> function of a hit

  // ---- favourites, kept where the browser allows it ----

  const starred = new Set();
  const KEPT = `kickrender favourites of ${data.title}`;
  const keep = () => {
    try {
      localStorage.setItem(KEPT, JSON.stringify([...starred].sort((a, b) => a - b).map((i) => data.names[i])));
    } catch { /* a browser that keeps nothing: the list can still be saved as a file */ }
  };
  try {
    const places = new Map(data.names.map((name, i) => [name, i]));
    for (const name of JSON.parse(localStorage.getItem(KEPT) ?? "[]")) if (places.has(name)) starred.add(places.get(name));
  } catch { /* nothing kept, or nothing readable */ }

  const showStars = () => {
    at("star-count").textContent = starred.size ? count(starred.size, "favourite") : "No favourites yet";
    at("export").disabled = starred.size === 0;
  };
  const star = (hit) => {
    if (!starred.delete(hit)) starred.add(hit);
    const button = rowOf(hit)?.querySelector(".star");
    button?.setAttribute("aria-pressed", String(starred.has(hit)));
    say(`${data.names[hit]} ${starred.has(hit) ? "is a favourite" : "is no favourite any more"}`);
    keep();
    showStars();
  };
  at("export").addEventListener("click", () => {
    const lines = [...starred].sort((a, b) => a - b).map((i) => `${data.names[i]}\n`);
    const link = make("a", { href: URL.createObjectURL(new Blob(lines, { type: "text/plain" })), download: "favourites.txt" });
    document.body.append(link);
    link.click();
    link.remove();
    setTimeout(() => URL.revokeObjectURL(link.href), 10_000);
    say(`${count(starred.size, "name")} saved in favourites.txt`);
  });

  // ---- sound: two players, which hold the last two hits ----

  const players = [at("player-0"), at("player-1")];
  const held = [null, null];
  let last = 1; // the player that sounded last
  const sounding = () => { // the hit that can be heard now
    const k = players.findIndex((player) => !player.paused && !player.ended);
    return k < 0 ? null : held[k];
  };
  const address = (file) => file.split("/").map(encodeURIComponent).join("/");
  const stop = () => {
    for (const player of players) player.pause();
    showSounding();
  };
  const play = (hit) => {
    const known = held.indexOf(hit);
    const k = known >= 0 ? known : 1 - last;
    const player = players[k];
    players[1 - k].pause();
    if (known < 0) {
      held[k] = hit;
      player.src = address(data.files[hit]);
    }
    last = k;
    player.currentTime = 0;
    player.play().then(
      () => { if (held[k] === hit) showSounding(); },
      (fault) => {
        if (fault.name === "AbortError") return; // another hit, or silence, was asked for meanwhile
        rowOf(hit)?.classList.add("missing");
        say(`${data.names[hit]} cannot be played: its file is not beside this page`);
      },
    );
    say(`Playing ${data.names[hit]}`);
    showSounding();
  };
  const showSounding = () => {
    const now = sounding();
    for (const row of at("hits").tBodies[0].rows) row.classList.toggle("sounding", Number(row.dataset.hit) === now);
    held.forEach((hit, k) => {
      const button = at(`play-${k}`);
      button.disabled = hit === null;
      button.setAttribute("aria-pressed", String(hit !== null && hit === now));
      if (hit === null) return;
      button.querySelector("span").replaceChildren(...breakable(data.names[hit]));
      button.setAttribute("aria-label", `${"AB"[k]}, play ${data.names[hit]}`);
    });
    at("swap").disabled = held.includes(null);
  };
  for (const player of players) player.addEventListener("ended", showSounding);
  const swap = () => { if (!held.includes(null)) play(held[1 - last]); };
  at("swap").addEventListener("click", swap);
  at("play-0").addEventListener("click", () => play(held[0]));
  at("play-1").addEventListener("click", () => play(held[1]));

  // ---- the table ----

  const visible = () => columns.filter((column) => column.shown);
  const rowOf = (hit) => at("hits").tBodies[0].querySelector(`tr[data-hit="${hit}"]`);

  // A name breaks where its maker joined it, and elsewhere only when a piece is long.
  const breakable = (name) => name.split(/(?<=[/_ ])/).flatMap((piece) => [
    piece.length > 28 ? piece : make("span", { className: "piece", textContent: piece }), make("wbr"),
  ]);

  const head = () => {
    const row = attributes(make("tr"), { role: "row" });
    const add = (th, words) => {
      th.scope = "col";
      th.className = words ? "words" : "";
      row.append(attributes(th, { role: "columnheader" }));
    };
    add(make("th", {}, make("span", { className: "hidden-text", textContent: "Favourite" })), true);
    for (const column of visible()) {
      const button = make("button", { type: "button", textContent: column.label });
      button.addEventListener("click", () => sort(column.key, sortedBy === column.key && !descending));
      const th = make("th", {}, button);
      if (column.unit) th.append(" ", make("small", { textContent: column.unit }));
      if (sortedBy === column.key) th.setAttribute("aria-sort", descending ? "descending" : "ascending");
      add(th, column.words);
      if (column.key === "name") add(make("th", { textContent: "Shape, pitch" }), true);
    }
    at("hits").tHead.replaceChildren(row);
  };

  const row = (hit) => {
    const name = data.names[hit];
    const button = attributes(make("button", { type: "button", className: "play", tabIndex: -1 },
      make("span", {}, ...breakable(name))), { "aria-label": `Play ${name}` });
    const tr = attributes(make("tr"), { role: "row", "data-hit": hit });
    const favourite = attributes(make("button", { type: "button", className: "star", tabIndex: -1 }),
      { "aria-label": `Favourite ${name}`, "aria-pressed": starred.has(hit) });
    tr.append(attributes(make("td", { className: "star-cell" }, favourite), { role: "cell" }));
    tr.append(attributes(make("th", { scope: "row" }, button), { role: "rowheader" }));
    const canvas = attributes(make("canvas"), { role: "img", "aria-label": data.spoken[hit] });
    tr.append(attributes(make("td", { className: "shape" }, canvas), { role: "cell" }));
    for (const column of visible().slice(1)) {
      const text = column.text(hit);
      const td = make("td", { className: column.words ? "number words" : "number" }, make("span", { textContent: text }));
      if (text && column.unit && !column.axis) td.lastChild.append(make("span", { className: "unit", textContent: ` ${column.unit}` }));
      tr.append(attributes(td, { role: "cell", "data-label": column.label }));
    }
    return tr;
  };

  const body = () => {
    const first = Math.floor(place / PAGE) * PAGE;
    const hits = listed.slice(first, first + PAGE);
    at("hits").tBodies[0].replaceChildren(...hits.map(row));
    at("hits").hidden = listed.length === 0;
    at("none").hidden = listed.length > 0;
    at("pages").hidden = listed.length <= PAGE;
    at("page").textContent = `${first + 1} to ${first + hits.length} of ${listed.length.toLocaleString("en")}`;
    at("back").disabled = first === 0;
    at("on").disabled = first + PAGE >= listed.length;
    draw();
    showCurrent();
    showSounding();
  };

  const showCurrent = () => {
    const current = listed[place];
    for (const tr of at("hits").tBodies[0].rows) {
      const here = Number(tr.dataset.hit) === current;
      tr.classList.toggle("current", here);
      for (const button of tr.querySelectorAll("button")) button.tabIndex = here ? 0 : -1;
    }
  };

  // Moves the current hit; turns the page when it lies on another one.
  const go = (to, focus = true) => {
    if (!listed.length) return;
    const before = Math.floor(place / PAGE);
    place = Math.max(0, Math.min(listed.length - 1, to));
    if (Math.floor(place / PAGE) === before) showCurrent();
    else body();
    if (!focus) return;
    const tr = rowOf(listed[place]);
    tr.querySelector(".play").focus({ preventScroll: true });
    tr.scrollIntoView({ block: place % PAGE === 0 ? "center" : "nearest" });
  };
  const turnTo = (to) => {
    go(to, false);
    const list = at("list");
    if (list.scrollHeight > list.clientHeight) list.scrollTop = 0;
    else list.scrollIntoView();
    at("list").focus({ preventScroll: true });
  };
  at("back").addEventListener("click", () => turnTo((Math.floor(place / PAGE) - 1) * PAGE));
  at("on").addEventListener("click", () => turnTo((Math.floor(place / PAGE) + 1) * PAGE));

  at("hits").tBodies[0].addEventListener("click", (event) => {
    const tr = event.target.closest("tr");
    const hit = Number(tr.dataset.hit);
    go(listed.indexOf(hit), false);
    if (event.target.closest(".star")) star(hit);
    else if (sounding() === hit) stop();
    else play(hit);
  });

  // ---- thumbnails ----

  const scheme = matchMedia("(prefers-color-scheme: dark)");
  const draw = () => {
    const style = getComputedStyle(document.documentElement);
    const [shape, line, warm] = ["--shape", "--line", "--warm"].map((name) => style.getPropertyValue(name));
    const canvases = [...at("hits").tBodies[0].querySelectorAll("canvas")];
    if (!canvases.length) return;
    // One size for all, read once: to ask each after changing the one before would lay the page out every time.
    const { clientWidth: width, clientHeight: height } = canvases[0];
    for (const canvas of canvases) drawOne(canvas, Number(canvas.closest("tr").dataset.hit), width, height, shape, line, warm);
  };
  const drawOne = (canvas, hit, width, height, shape, line, warm) => {
    const scale = window.devicePixelRatio || 1;
    canvas.width = Math.round(width * scale);
    canvas.height = Math.round(height * scale);
    const pen = canvas.getContext("2d");
    pen.scale(scale, scale);
    const n = data.columns, step = width / n, start = hit * 3 * n;
    const signed = (k) => (pictures[k] << 24) >> 24;
    const middle = height * 0.34, reach = height * 0.32; // outline above, pitch below, one time scale for both
    pen.fillStyle = line;
    pen.fillRect(0, middle - 0.5, width, 1);
    pen.fillStyle = shape;
    for (let k = 0; k < n; k++) {
      const low = signed(start + k) / 127, high = signed(start + n + k) / 127;
      if (low || high) pen.fillRect(k * step, middle - high * reach, step + 0.3, Math.max(1, (high - low) * reach));
    }
    pen.strokeStyle = warm;
    pen.lineWidth = 1.6;
    pen.lineJoin = "round";
    pen.beginPath();
    let drawn = false;
    for (let k = 0; k < n; k++) {
      const value = pictures[start + 2 * n + k];
      if (value === 0) { drawn = false; continue; }
      const y = height - 1.5 - ((value - 1) / 254) * height * 0.27;
      if (drawn) pen.lineTo((k + 0.5) * step, y);
      else pen.moveTo((k + (k ? 0.5 : 0)) * step, y);
      drawn = true;
    }
    pen.stroke();
  };
  scheme.addEventListener("change", draw);
  let drawing = 0;
  addEventListener("resize", () => {
    cancelAnimationFrame(drawing);
    drawing = requestAnimationFrame(draw);
  });

  // ---- sorting and filtering ----

  const list = (said) => {
    const current = listed[place];
    const words = at("words").value.toLowerCase().split(/\s+/).filter(Boolean);
    const only = at("starred-only").checked;
    const chosen = [...filters.values()];
    const fits = (i) => (!only || starred.has(i)) && words.every((word) => haystacks[i].includes(word))
      && chosen.every((filter) => filter(i));
    const key = byKey.get(sortedBy).sort;
    const sign = descending ? -1 : 1;
    listed = data.names.map((_, i) => i).filter(fits).sort((a, b) => {
      const x = key(a), y = key(b);
      if (x === null || y === null) return (x === null) - (y === null) || a - b; // without a value: last, both ways
      return x < y ? -sign : x > y ? sign : a - b;
    });
    place = Math.max(0, listed.indexOf(current));
    head();
    body();
    const text = listed.length === total ? count(total, "hit") : `${listed.length.toLocaleString("en")} of ${count(total, "hit")}`;
    at("shown").textContent = text;
    at("filter-count").textContent = filters.size ? `(${filters.size} set)` : "";
    at("clear").disabled = !filters.size && !words.length && !only;
    at("sort").value = sortedBy;
    at("turn").setAttribute("aria-pressed", String(descending));
    say(said ? `${said}. ${text}` : text);
  };
  const sort = (key, down) => {
    const column = byKey.get(key);
    if (!column.shown) {
      column.shown = true;
      at("columns").querySelectorAll("input").forEach((box) => { if (box.value === key) box.checked = true; });
    }
    [sortedBy, descending, place] = [key, down, 0];
    const focused = at("hits").tHead.contains(document.activeElement);
    listed = []; // a new order is read from its top
    list(`Sorted by ${column.label}, ${down ? "descending" : "ascending"}`);
    at("list").scrollTop = 0;
    if (focused) at("hits").tHead.querySelector("[aria-sort] button").focus();
  };

  const groups = ["Settings", "Measured"].map((label) => make("optgroup", { label }));
  at("sort").append(make("option", { value: "name", textContent: "pack order" }), ...groups);
  for (const column of columns.slice(1)) {
    groups[column.axis ? 0 : 1].append(make("option", { value: column.key, textContent: column.label }));
    const box = make("input", { type: "checkbox", value: column.key, checked: column.shown });
    box.addEventListener("change", () => { column.shown = box.checked; head(); body(); });
    at(column.axis ? "setting-choices" : "measure-choices").append(make("label", {}, box, column.label));
  }
  for (const group of groups) if (!group.children.length) group.remove();
  at("sort").addEventListener("change", () => sort(at("sort").value, descending));
  at("turn").addEventListener("click", () => sort(sortedBy, !descending));

  for (const axis of data.axes.filter((a) => a.labels.length > 1)) {
    const set = make("fieldset", {}, make("legend", { textContent: axis.name }));
    const choose = (filter) => {
      if (filter) filters.set(axis, filter);
      else filters.delete(axis);
      list();
    };
    if (axis.labels.length <= MOST_CHOICES || axis.words) {
      const chips = make("div", { className: "chips" });
      axis.labels.forEach((label, k) => chips.append(make("label", {}, make("input", { type: "checkbox", value: k }), label)));
      chips.addEventListener("change", () => {
        const chosen = new Set([...chips.querySelectorAll(":checked")].map((box) => Number(box.value)));
        choose(chosen.size ? (i) => chosen.has(axis.at[i]) : null);
      });
      set.append(chips);
    } else {
      const ends = ["lowest", "highest"].map((word, k) => attributes(
        make("input", { type: "number", step: "any", placeholder: axis.values.at(-k) }), { "aria-label": `${axis.name}, ${word}` }));
      set.append(make("div", { className: "span" }, ends[0], "to", ends[1]));
      set.addEventListener("input", () => {
        const [low, high] = ends.map((input) => (input.value === "" ? null : Number(input.value)));
        const inside = (value) => (low === null || value >= low) && (high === null || value <= high);
        choose(low === null && high === null ? null : (i) => axis.at[i] >= 0 && inside(axis.values[axis.at[i]]));
      });
    }
    at("axes").append(set);
  }
  const clear = () => {
    filters.clear();
    at("find").querySelectorAll("#axes input").forEach((input) => {
      if (input.type === "checkbox") input.checked = false;
      else input.value = "";
    });
    at("words").value = "";
    at("starred-only").checked = false;
    list("Filters cleared");
  };
  at("clear").addEventListener("click", clear);
  at("clear-too").addEventListener("click", () => { clear(); go(place); });
  at("words").addEventListener("input", () => list());
  at("starred-only").addEventListener("change", () => list());
  at("find").addEventListener("submit", (event) => event.preventDefault());

  // ---- keys ----

  const move = (to) => {
    go(to);
    if (at("play-on-move").checked && listed.length) play(listed[place]);
  };
  const moves = {
    ArrowDown: () => move(place + 1), ArrowUp: () => move(place - 1), Home: () => move(0), End: () => move(listed.length - 1),
  };
  const letters = { x: swap, f: () => { if (listed.length) star(listed[place]); }, "/": () => at("words").focus() };
  const toggle = () => {
    if (!listed.length) return;
    if (sounding() === listed[place]) stop();
    else play(listed[place]);
  };
  const isSpaceForUs = (event) => event.key === " "
    && (event.target === document.body || event.target === at("list") || event.target.classList.contains("play"));
  addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.altKey || event.metaKey || event.target.matches("input:not([type=checkbox]), select, textarea")) return;
    const key = event.key.length === 1 ? event.key.toLowerCase() : event.key;
    if (moves[key]) moves[key]();
    else if (isSpaceForUs(event)) { if (!event.repeat) toggle(); }
    else if (letters[key] && at("letter-keys").checked) letters[key]();
    else return;
    event.preventDefault();
  });
  addEventListener("keyup", (event) => { if (isSpaceForUs(event)) event.preventDefault(); }); // some browsers click here

  if (matchMedia("(max-width: 760px)").matches) at("filters").open = false;
  showStars();
  list();
})();
