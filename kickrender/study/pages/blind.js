"use strict";
(() => {
  // Everything lives in this function: nothing that says what X is can be reached from outside it.
  const data = JSON.parse(document.getElementById("data").textContent);
  document.getElementById("data").remove();
  const FADE_S = 0.012; // long enough not to click, short enough to be instant
  const LEAD_S = 0.02; // between asking and happening, so that both sounds are told in time
  const FADE_STEPS = 25;

  const at = (id) => document.getElementById(id);
  const say = (text) => { at("status").textContent = text; };
  const LETTERS = ["A", "B"];
  const sounds = [data.sounds[data.a], data.sounds[1 - data.a]];

  // ---- sound: both run in step, in a loop; gains, which add up to one at every moment, say which is heard ----

  let context = null;
  let master = null;
  let voices = null; // {sources, gains, which: the gain that is up, free: when the next fade may begin}
  let heard = null; // what the listener asked for: "A", "B" or "X"; null when silent
  let buffers = null;

  const decoded = (sound) => {
    const bytes = Uint8Array.from(atob(sound.samples), (c) => c.charCodeAt(0));
    const samples = new Float32Array(bytes.buffer);
    const buffer = context.createBuffer(1, samples.length + Math.round(data.pause_s * data.rate_hz), data.rate_hz);
    buffer.copyToChannel(samples, 0);
    return buffer;
  };
  const prepare = () => {
    if (context) return;
    context = new AudioContext({ sampleRate: data.rate_hz, latencyHint: "interactive" });
    master = context.createGain();
    master.gain.value = Number(at("volume").value);
    master.connect(context.destination);
    buffers = sounds.map(decoded);
  };
  // Raised-cosine ramps of a crossfade; for sounds that are alike their sum has to be one, not their powers'.
  const ramp = (from, to) => Float32Array.from({ length: FADE_STEPS }, (_, k) => (
    from + (to - from) * (0.5 - 0.5 * Math.cos((Math.PI * k) / (FADE_STEPS - 1)))));

  const start = (which) => {
    const when = context.currentTime + LEAD_S;
    const gains = buffers.map((_, k) => new GainNode(context, { gain: k === which ? 1 : 0 }));
    const sources = buffers.map((buffer, k) => {
      const source = new AudioBufferSourceNode(context, { buffer, loop: true });
      source.connect(gains[k]).connect(master);
      source.start(when);
      return source;
    });
    voices = { sources, gains, which, free: when };
  };
  // Every fade begins after the one before it is over: a curve may not begin inside another.
  const fade = (levels) => {
    const when = Math.max(context.currentTime + LEAD_S, voices.free);
    voices.gains.forEach((gain, k) => {
      gain.gain.setValueCurveAtTime(ramp(k === voices.which ? 1 : 0, levels[k]), when, FADE_S);
    });
    voices.free = when + FADE_S + LEAD_S / 10;
  };
  const end = () => {
    if (!voices) return;
    fade([0, 0]);
    for (const source of voices.sources) source.stop(voices.free);
    voices = null;
  };
  const turn = (which) => {
    fade(voices.gains.map((_, k) => (k === which ? 1 : 0)));
    voices.which = which;
  };
  const hear = (letter) => {
    if (letter === "X" && !trial) return;
    prepare();
    context.resume();
    const which = letter === "X" ? trial.x : LETTERS.indexOf(letter);
    if (voices && at("restart").checked) end();
    if (voices) turn(which);
    else start(which);
    heard = letter;
    if (trial) trial.heard[letter] += 1;
    show();
  };
  const silence = () => {
    if (context) end();
    heard = null;
    show();
  };

  // ---- the test ----

  let trial = null; // the one under way: what X is, what was said, since when
  const trials = [];
  let wanted = "A"; // what Space plays

  const coin = () => crypto.getRandomValues(new Uint8Array(1))[0] & 1;
  const begin = () => {
    silence();
    trial = { x: coin(), said: null, since: performance.now(), heard: { A: 0, B: 0, X: 0 } };
    wanted = "X";
    at("before").hidden = true;
    at("begin").hidden = true;
    for (const id of ["trial", "hear-X", "answers", "next"]) at(id).hidden = false;
    at("trial-heading").textContent = `Trial ${trials.length + 1} of ${data.trials}`;
    at("done").value = trials.length;
    say("");
    show();
    at("trial-heading").focus();
  };
  const answer = (letter) => {
    if (!trial) return;
    trial.said = LETTERS.indexOf(letter);
    show();
  };
  const give = () => {
    if (!trial || trial.said === null) return;
    trials.push({
      x: LETTERS[trial.x],
      answer: LETTERS[trial.said],
      seconds: Math.round((performance.now() - trial.since) / 100) / 10,
      heard: trial.heard,
    });
    trial = null;
    if (trials.length < data.trials) begin();
    else finish();
  };

  // The chance of `right` or more of `count` by guessing: whole numbers up to the one division.
  const chance = (right, count) => {
    let ways = 1n, sum = 0n;
    for (let k = 0; k <= count; k++) {
      if (k >= right) sum += ways;
      ways = (ways * BigInt(count - k)) / BigInt(k + 1);
    }
    return Number(sum) / 2 ** count;
  };

  const finish = () => {
    silence();
    const right = trials.filter((t) => t.x === t.answer).length;
    const p = chance(right, data.trials);
    at("trial").hidden = true;
    at("desk").hidden = true;
    at("after").hidden = false;
    at("after-heading").textContent = `${right} of ${data.trials} right`;
    at("verdict").textContent = `By guessing alone, so many or more come up with p = ${p < 0.001 ? p.toExponential(2) : p.toFixed(4)}. `
      + (p < 0.05 ? "It is unlikely that you were guessing." : "Guessing explains this well enough.");
    for (const [k, sound] of sounds.entries()) {
      const name = document.createElement("dd");
      const digest = document.createElement("small");
      name.textContent = sound.label;
      digest.textContent = sound.digest;
      name.append(digest);
      const letter = document.createElement("dt");
      letter.textContent = LETTERS[k];
      at("which").append(letter, name);
    }
    for (const [k, t] of trials.entries()) {
      const row = at("rows").insertRow();
      if (t.x !== t.answer) row.className = "wrong";
      for (const text of [k + 1, t.x, t.answer, t.seconds.toFixed(1)]) row.insertCell().textContent = text;
    }
    const sitting = [...crypto.getRandomValues(new Uint8Array(16))].map((b) => b.toString(16).padStart(2, "0")).join("");
    const result = {
      schema: data.schema,
      schema_version: data.schema_version,
      title: document.querySelector("h1").textContent,
      sitting,
      listener: at("listener").value.trim(),
      finished: new Date().toISOString(),
      sounds: Object.fromEntries(sounds.map((sound, k) => [LETTERS[k], { label: sound.label, digest: sound.digest }])),
      trials_planned: data.trials,
      trials,
      correct: right,
      p_value: p,
    };
    at("save").addEventListener("click", () => {
      const link = document.createElement("a");
      const text = `${JSON.stringify(result, null, 2)}\n`;
      link.href = URL.createObjectURL(new Blob([text], { type: "application/json" }));
      link.download = `blind-result-${sitting.slice(0, 8)}.json`;
      document.body.append(link);
      link.click();
      link.remove();
      setTimeout(() => URL.revokeObjectURL(link.href), 10_000);
    });
    at("after-heading").focus();
    removeEventListener("beforeunload", warn);
  };
  const warn = (event) => { if (trials.length) event.preventDefault(); }; // answers would be lost
  addEventListener("beforeunload", warn);

  // ---- what is seen ----

  const show = () => {
    for (const letter of ["A", "B", "X"]) at(`hear-${letter}`).setAttribute("aria-pressed", String(heard === letter));
    for (const [k, letter] of LETTERS.entries()) {
      const said = trial !== null && trial.said === k;
      at(`say-${letter}`).setAttribute("aria-pressed", String(said));
    }
    at("stop").disabled = heard === null;
    at("next").disabled = trial === null || trial.said === null;
    if (heard) wanted = heard;
  };
  for (const letter of ["A", "B", "X"]) at(`hear-${letter}`).addEventListener("click", () => hear(letter));
  for (const letter of LETTERS) at(`say-${letter}`).addEventListener("click", () => answer(letter));
  at("stop").addEventListener("click", silence);
  at("begin").addEventListener("click", begin);
  at("next").addEventListener("click", give);
  at("volume").addEventListener("input", () => master?.gain.setTargetAtTime(Number(at("volume").value), context.currentTime, 0.01));

  const letters = {
    a: () => hear("A"), b: () => hear("B"), x: () => hear("X"), 1: () => answer("A"), 2: () => answer("B"),
  };
  addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.altKey || event.metaKey || event.repeat || event.target.matches("input[type=text]")) return;
    if (!at("after").hidden) return;
    const inside = event.target.matches("button, summary, a, input");
    const key = event.key.toLowerCase();
    if (key === "enter" && trial && !event.target.matches("#next, summary, #stop")) give();
    else if (key === " " && !inside) { if (heard) silence(); else hear(wanted); }
    else if (letters[key] && at("keys").checked) letters[key]();
    else return;
    event.preventDefault();
  });
  show();
})();
