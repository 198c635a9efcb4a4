"use strict";
// The page's own script: unpacks the numbers, and draws what day, quantity, units, mark and county ask for.

const $ = (id) => document.getElementById(id);
const data = JSON.parse($("data").textContent);
const SVG = "http://www.w3.org/2000/svg";
const DAY_MS = 86400000;
const quantities = new Map(data.quantities.map((row) => [row.name, row]));
const state = {
  day: data.day, quantity: data.quantities[0].name, units: data.system, mark: null, county: 0, stand: null,
  sort: "value", down: true, colours: "all",
};

// --- numbers ---

function unpack(packed) {
  if (!packed) return null;
  const bytes = Uint8Array.from(atob(packed.b), (letter) => letter.charCodeAt(0));
  const whole = packed.bits === 16 ? new Int16Array(bytes.buffer) : new Int32Array(bytes.buffer);
  const missing = packed.bits === 16 ? -(2 ** 15) : -(2 ** 31);
  const decimals = Math.round(1 / packed.step);
  const last = packed.shape.slice(1).reduce((product, size) => product * size, 1);
  const at = (index) => (whole[index] === missing ? NaN : whole[index] / decimals);
  return { at, row: last, shape: packed.shape };
}

const values = new Map(Object.entries(data.values).map(([name, packed]) => [name, unpack(packed)]));
const confidence = unpack(data.confidence.codes);
const flags = unpack(data.flags.bits);
const byCover = unpack(data.byCover);
const byAge = unpack(data.byAge);
const wind = data.wind && { east: unpack(data.wind.east), north: unpack(data.wind.north) };
const off = Object.fromEntries(Object.entries(data.off).map(([name, packed]) => [name, unpack(packed)]));
const standLines = Object.fromEntries(Object.entries(data.stands.values).map(([name, packed]) => [name, unpack(packed)]));
const hourly = data.hours && Object.fromEntries(
  Object.entries(data.hours.values).map(([name, packed]) => [name, unpack(packed)]));
const clock = data.hours ? unpack(data.hours.clock) : null;

const si = (name, day, county) => (day < 0 ? NaN : values.get(name).at(day * data.counties.length + county));

function people(row, number) {
  const [factor, shift] = row.to[state.units];
  return factor * number + shift;
}

function change(row, difference) {
  return row.to[state.units][0] * difference;
}

function shown(row, number, signed = false) {
  if (Number.isNaN(number)) return "–";
  const places = row.decimals[state.units];
  const text = Math.abs(number).toLocaleString("en-US", { minimumFractionDigits: places, maximumFractionDigits: places });
  const zero = Number(text.replace(/,/g, "")) === 0;
  if (signed) return zero ? "no change" : (number > 0 ? "+" : "−") + text;
  return (number < 0 && !zero ? "−" : "") + text;
}

const A_RANGE = data.confidence.words.indexOf("a range only");
const unitOf = (row) => row.unit[state.units];
const withUnit = (row, number, signed = false) => `${shown(row, number, signed)} ${unitOf(row)}`.trim();
const current = () => quantities.get(state.quantity);
const isContribution = () => state.quantity === "contribution_c";

function unranked(county) {
  return current().ranked && sureCode(state.day, county) === A_RANGE;
}

function dayWords(day) {
  const date = new Date(`${data.dates[day]}T00:00:00Z`);
  return date.toLocaleDateString("en-GB", { day: "numeric", month: "long", year: "numeric", timeZone: "UTC" });
}

function remarks(day, county) {
  const bits = flags.at(day * data.counties.length + county);
  return Object.entries(data.flags.words).filter(([bit]) => Math.floor(bits / bit) % 2 === 1).map(([, words]) => words);
}

const sureCode = (day, county) => confidence.at(day * data.counties.length + county);
const sureWords = (day, county) => data.confidence.words[sureCode(day, county)];

function range(county) {
  if (!isContribution() || !values.has("contribution_low_c") || !values.has("contribution_high_c")) return null;
  const [low, high] = ["contribution_low_c", "contribution_high_c"].map((name) => si(name, state.day, county));
  return Number.isNaN(low) ? null : [people(current(), low), people(current(), high)];
}

// --- colours ---

function mix(palette, share) {
  const place = Math.max(0, Math.min(1, share)) * (palette.length - 1);
  const low = Math.min(Math.floor(place), palette.length - 2);
  const part = place - low;
  const channel = (hex, k) => parseInt(hex.slice(1 + 2 * k, 3 + 2 * k), 16);
  const mixed = [0, 1, 2].map((k) => Math.round(
    channel(palette[low], k) * (1 - part) + channel(palette[low + 1], k) * part));
  return `rgb(${mixed.join(",")})`;
}

const extents = new Map();

// Ends of a quantity over all days, so that a colour means the same on each of them.
function extent(name) {
  if (state.colours === "day") return ofDay(name);
  if (!extents.has(name)) {
    const found = [];
    for (let day = 0; day < data.dates.length; day += 1) {
      for (let county = 0; county < data.counties.length; county += 1) {
        const number = si(name, day, county);
        if (!Number.isNaN(number)) found.push(number);
      }
    }
    found.sort((a, b) => a - b);
    const at = (share) => found[Math.round(share * (found.length - 1))];
    const low = found.length ? Math.min(at(0.01), at(0) >= 0 && at(0.01) < 0.35 * at(0.99) ? 0 : at(0.01)) : 0;
    extents.set(name, found.length ? [low, Math.max(at(0.99), low + 1e-6)] : [0, 1]);
  }
  return extents.get(name);
}

function ofDay(name) {
  const found = data.counties.map((_, place) => si(name, state.day, place)).filter((number) => !Number.isNaN(number));
  if (!found.length) return [0, 1];
  const [low, high] = [Math.min(...found), Math.max(...found)];
  return [low, Math.max(high, low + 1e-6)];
}

// --- the map ---

function make(tag, attributes, parent) {
  const element = document.createElementNS(SVG, tag);
  for (const [name, value] of Object.entries(attributes)) element.setAttribute(name, value);
  parent.appendChild(element);
  return element;
}

const shapeOf = (county) => (county.path ? ["path", { d: county.path, "fill-rule": "evenodd" }]
  : ["circle", { cx: county.x, cy: county.y, r: county.r }]);

const shapes = data.counties.map((county, place) => {
  const [tag, attributes] = shapeOf(county);
  const shape = make(tag, { ...attributes, tabindex: 0, role: "button", "data-id": county.id }, $("shapes"));
  shape.addEventListener("click", () => choose(place));
  shape.addEventListener("keydown", (event) => {
    if (event.key === "Enter" || event.key === " ") {
      event.preventDefault();
      choose(place);
    }
  });
  shape.addEventListener("mousemove", (event) => tip(place, event.pageX, event.pageY));
  shape.addEventListener("mouseleave", () => { $("tip").hidden = true; });
  shape.addEventListener("focus", () => {
    const box = shape.getBoundingClientRect();
    tip(place, box.right + window.scrollX, box.top + window.scrollY);
  });
  shape.addEventListener("blur", () => { $("tip").hidden = true; });
  return shape;
});
const hatches = data.counties.map((county) => {
  const [tag, attributes] = shapeOf(county);
  return make(tag, { ...attributes, fill: "url(#missing)" }, $("unranked"));
});
for (const station of data.stations) {
  const { x, y } = station;
  make("path", { d: `M${x},${y - 9}L${x + 8},${y + 6}L${x - 8},${y + 6}Z` }, $("stations"));
}
const ARROW_STEP = Math.ceil(data.counties.length / 60); // more arrows than that hide the map
$("shapes").classList.toggle("many", data.counties.length > 100);
const LABELS_UP_TO = 60; // counties; beyond, the numbers would cover the map
const labels = data.counties.length > LABELS_UP_TO ? [] : data.counties.map((county) => make("text",
  { x: county.x, y: county.y - 8, "text-anchor": "middle" }, $("labels")));
const arrows = wind ? data.counties.map(() => make("line", { "marker-end": "url(#head)" }, $("arrows"))) : [];

function tipText(place) {
  const county = data.counties[place];
  const row = current();
  const lines = [county.name, `${row.label}: ${withUnit(row, people(row, si(row.name, state.day, place)))}`];
  const ends = range(place);
  if (ends) lines.push(`from ${shown(row, ends[0])} to ${withUnit(row, ends[1])}`);
  lines.push(`since the day before: ${sinceBefore(place)}`);
  if (row.ranked) lines.push(`how sure: ${sureWords(state.day, place)}`);
  if (wind) lines.push(...windText(place));
  return lines.join("\n");
}

function windText(place) {
  const [east, north] = windOf(place);
  if (Number.isNaN(east)) return [];
  const speed = Math.hypot(east, north) * data.wind.factor[state.units];
  const from = (Math.round(Math.atan2(-east, -north) * 180 / Math.PI) + 360) % 360;
  return [`wind by day: ${speed.toFixed(data.wind.decimals[state.units])} ${data.wind.unit[state.units]} from ${from}°`];
}

function windOf(place) {
  const index = state.day * data.counties.length + place;
  return [wind.east.at(index), wind.north.at(index)];
}

function tip(place, x, y) {
  const box = $("tip");
  box.textContent = tipText(place);
  box.hidden = false;
  box.style.left = `${Math.min(x + 14, window.scrollX + document.documentElement.clientWidth - 270)}px`;
  box.style.top = `${y + 14}px`;
}

function sinceBefore(place) {
  const row = current();
  const difference = si(row.name, state.day, place) - si(row.name, state.day - 1, place);
  if (Number.isNaN(difference)) return "–";
  const text = shown(row, change(row, difference), true);
  return text === "no change" ? text : `${text} ${unitOf(row)}`;
}

function past(place) {
  const number = people(current(), si(state.quantity, state.day, place));
  return state.mark !== null && number >= state.mark;
}

function drawMap() {
  const row = current();
  const [low, high] = extent(row.name);
  data.counties.forEach((county, place) => {
    const number = si(row.name, state.day, place);
    const shape = shapes[place];
    const blank = Number.isNaN(number) || unranked(place);
    shape.setAttribute("fill", Number.isNaN(number) ? "#f4f4f1" : mix(row.palette, (number - low) / (high - low)));
    hatches[place].style.display = blank ? "" : "none";
    hatches[place].style.opacity = Number.isNaN(number) ? 1 : 0.45;
    shape.classList.toggle("past", past(place));
    shape.classList.toggle("chosen", place === state.county);
    shape.setAttribute("aria-label", tipText(place).replace(/\n/g, ", "));
    shape.setAttribute("aria-pressed", String(place === state.county));
  });
  [...data.counties.keys()].sort((a, b) => Number(past(a)) - Number(past(b)) || Number(a === state.county)
    - Number(b === state.county)).forEach((place) => {
    if (past(place) || place === state.county) $("shapes").appendChild(shapes[place]);
  });
  arrows.forEach((arrow, place) => {
    const [east, north] = windOf(place);
    const county = data.counties[place];
    const length = Math.hypot(east, north);
    const draw = length > 0.2 && place % ARROW_STEP === 0;
    arrow.style.display = draw ? "" : "none";
    if (!draw) return;
    const reach = Math.min(14 + 3 * length, 44) / length / 2;
    const below = county.y + (labels.length ? 22 : 0);
    arrow.setAttribute("x1", county.x - reach * east);
    arrow.setAttribute("y1", below + reach * north);
    arrow.setAttribute("x2", county.x + reach * east);
    arrow.setAttribute("y2", below - reach * north);
  });
  labels.forEach((label, place) => {
    const number = si(row.name, state.day, place);
    label.textContent = Number.isNaN(number) ? "" : shown(row, people(row, number));
  });
  $("wind-key").hidden = !wind || !arrows.some((arrow) => arrow.style.display !== "none");
  drawScale(row, low, high);
}

function drawScale(row, low, high) {
  const stops = row.palette.map((colour, k) => `${colour} ${100 * k / (row.palette.length - 1)}%`);
  const scale = $("scale");
  scale.style.background = `linear-gradient(to right, ${stops.join(",")})`;
  const ends = [low, (low + high) / 2, high].map((number) => shown(row, people(row, number)));
  scale.setAttribute("aria-label", `Colours from ${ends[0]} to ${ends[2]} ${unitOf(row)}`);
  let ticks = document.querySelector(".ticks");
  if (!ticks) {
    ticks = document.createElement("div");
    ticks.className = "ticks";
    scale.after(ticks);
  }
  ticks.replaceChildren(...ends.map((text, k) => {
    const tick = document.createElement("span");
    tick.textContent = k === 2 ? `${text} ${unitOf(row)}` : text;
    return tick;
  }));
}

// --- words ---

function region(day) {
  const row = current();
  let total = 0;
  let area = 0;
  const numbers = [];
  data.counties.forEach((county, place) => {
    const number = si(row.name, day, place);
    if (Number.isNaN(number)) return;
    numbers.push(number);
    total += row.name === "water_volume_hm3" ? number : number * county.area;
    area += county.area;
  });
  if (!numbers.length) return null;
  const mean = row.name === "water_volume_hm3" ? total : total / area;
  return { mean, low: Math.min(...numbers), high: Math.max(...numbers), count: numbers.length };
}

function drawWords() {
  const row = current();
  $("day-text").textContent = dayWords(state.day);
  $("day").setAttribute("aria-valuetext", dayWords(state.day));
  $("map-title").textContent = `${row.label}, ${dayWords(state.day)}`;
  const now = region(state.day);
  const before = state.day > 0 ? region(state.day - 1) : null;
  const what = row.name === "water_volume_hm3" ? "Sum of the region" : "Mean of the region";
  let text = "No county has a value on this day: see the remarks in the table.";
  if (now) {
    text = `${what}: ${withUnit(row, people(row, now.mean))}; counties from ${shown(row, people(row, now.low))} to `
      + `${withUnit(row, people(row, now.high))} (${now.count} of ${data.counties.length} have a value).`;
    if (before) {
      const difference = shown(row, change(row, now.mean - before.mean), true);
      text += ` Since the day before: ${difference === "no change" ? difference : `${difference} ${unitOf(row)}`}.`;
    }
  }
  $("headline").textContent = text;
  const count = data.counties.filter((county, place) => past(place)).length;
  $("past").textContent = state.mark === null ? ""
    : `${count} of ${data.counties.length} counties at or above ${state.mark} ${unitOf(row)}.`;
  for (const span of document.querySelectorAll(".unit")) span.textContent = `(${unitOf(row) || "share"})`;
}

// --- the table ---

const ROWS_SHOWN = 400; // more rows than anybody reads make every move of the slider slow

const columns = () => [
  { key: "name", title: "County" },
  { key: "value", title: `${current().label} (${unitOf(current()) || "share"})`, number: true },
  { key: "change", title: "Since the day before", number: true },
  ...(isContribution() ? [{ key: "low", title: "At least", number: true }, { key: "high", title: "At most", number: true }]
    : []),
  { key: "sure", title: "How sure of the contribution" },
  { key: "remarks", title: "Remarks" },
];

function rows() {
  const row = current();
  return data.counties.map((county, place) => {
    const number = si(row.name, state.day, place);
    const ends = range(place) || [NaN, NaN];
    return {
      place, name: county.name, value: people(row, number),
      change: change(row, number - si(row.name, state.day - 1, place)), low: ends[0], high: ends[1],
      sure: sureCode(state.day, place), remarks: remarks(state.day, place).join("; "),
    };
  });
}

function compare(a, b) {
  const [x, y] = [a[state.sort], b[state.sort]];
  if (typeof x === "string") return (state.down ? -1 : 1) * x.localeCompare(y);
  if (Number.isNaN(x) || Number.isNaN(y)) return Number(Number.isNaN(x)) - Number(Number.isNaN(y));
  return (state.down ? -1 : 1) * (x - y);
}

function drawTable() {
  const listed = columns();
  if (!listed.some((column) => column.key === state.sort)) state.sort = "value";
  const head = document.createElement("tr");
  for (const column of listed) {
    const cell = document.createElement("th");
    cell.scope = "col";
    cell.className = column.number ? "number" : column.key;
    cell.setAttribute("aria-sort", state.sort !== column.key ? "none" : state.down ? "descending" : "ascending");
    const button = document.createElement("button");
    button.type = "button";
    button.dataset.key = column.key;
    button.textContent = column.title + (state.sort === column.key ? (state.down ? " ▾" : " ▴") : "");
    button.addEventListener("click", () => {
      state.down = state.sort === column.key ? !state.down : Boolean(column.number);
      state.sort = column.key;
      drawTable();
      document.querySelector(`#table button[data-key="${column.key}"]`).focus();
    });
    cell.append(button);
    head.append(cell);
  }
  const wanted = $("filter").value.trim().toLocaleLowerCase();
  const least = Number($("sure").value);
  const kept = rows().filter((row) => row.name.toLocaleLowerCase().includes(wanted) && row.sure >= least).sort(compare);
  const body = kept.slice(0, ROWS_SHOWN).map((row) => {
    const line = document.createElement("tr");
    line.dataset.id = data.counties[row.place].id;
    line.className = `${past(row.place) ? "past" : ""} ${row.place === state.county ? "chosen" : ""}`.trim();
    for (const column of listed) {
      const cell = document.createElement("td");
      cell.className = column.number ? "number" : column.key;
      if (column.key === "name") {
        const button = document.createElement("button");
        button.type = "button";
        button.textContent = row.name;
        button.addEventListener("click", () => choose(row.place, true));
        cell.append(button);
      } else if (column.key === "sure") cell.textContent = data.confidence.words[row.sure];
      else if (column.number) cell.textContent = shown(current(), row[column.key], column.key === "change");
      else cell.textContent = row[column.key];
      line.append(cell);
    }
    return line;
  });
  $("table").tHead.replaceChildren(head);
  $("table").tBodies[0].replaceChildren(...body);
  const first = kept.length > ROWS_SHOWN ? `first ${ROWS_SHOWN} of ` : "";
  $("caption").textContent = `${first}${kept.length} of ${data.counties.length} counties, ${dayWords(state.day)}`;
}

// --- the charts ---

const model = (name) => {
  for (const doc of window.Bokeh ? Bokeh.documents : []) {
    const found = doc.get_model_by_name(name);
    if (found) return found;
  }
  return null;
};

function fill(name, columnsOfData, now, heading, place, text) {
  const source = model(`${name}-data`);
  if (source) source.data = columnsOfData;
  const line = model(`${name}-now`);
  if (line) line.location = now;
  if (heading) $(heading[0]).textContent = heading[1];
  $(place).setAttribute("aria-label", text);
}

const stamps = data.dates.map((date) => Date.parse(`${date}T00:00:00Z`));

function drawHours() {
  const county = data.counties[state.county];
  const day = data.hours ? state.day - data.hours.first : -1;
  const depthRow = data.units.mixing_depth_m;
  const dewRow = data.units.dew_point_mixed_c;
  if (!data.hours || day < 0) {
    const why = data.hours ? "kept for the last days only; all are in results.nc" : "not computed";
    fill("dew", { x: [], with: [], without: [] }, -9, ["hours-text", `The hours of this day: ${why}.`], "c-dew", why);
    fill("depth", { x: [], depth: [] }, -9, ["depth-text", ""], "c-depth", why);
    return;
  }
  const hours = data.hours.hour;
  const start = (day * data.counties.length + state.county) * hours.length;
  const line = (name) => hours.map((hour, k) => hourly[name].at(start + k));
  const [dew, added, depth] = ["dew_point_mixed_c", "contribution_c", "mixing_depth_m"].map(line);
  const withCrops = dew.map((number) => people(dewRow, number));
  const without = dew.map((number, k) => people(dewRow, number - (Number.isNaN(added[k]) ? 0 : added[k])));
  const shift = clock ? clock.at(day * data.counties.length + state.county) : NaN;
  const noon = Number.isNaN(shift) ? "" : `; 12 h is ${clockWords(12 + shift)} standard time`;
  const k = hours.indexOf(15);
  const text = k < 0 ? "" : `${county.name}, ${dayWords(state.day)}, 15 h: dew point ${withUnit(dewRow, withCrops[k])}, `
    + `without the crops' water ${withUnit(dewRow, without[k])}, mixing depth ${withUnit(depthRow, people(depthRow, depth[k]))}`;
  fill("dew", { x: hours, with: withCrops, without }, 15,
    ["hours-text", `Dew point of the mixed air (${unitOf(dewRow)})${noon}`], "c-dew", text);
  fill("depth", { x: hours, depth: depth.map((number) => people(depthRow, number)) }, 15,
    ["depth-text", `Mixing depth (${unitOf(depthRow)})`], "c-depth", text);
}

function clockWords(hour) {
  const minutes = Math.round(hour * 60);
  return `${String(Math.floor(minutes / 60)).padStart(2, "0")}:${String(minutes % 60).padStart(2, "0")}`;
}

function drawEpisode() {
  const row = data.units.contribution_c;
  const first = Math.max(0, state.day - 13);
  const days = stamps.slice(first, state.day + 1);
  const county = data.counties[state.county];
  const part = (packed, day, k) => {
    const number = packed.at((day * data.counties.length + state.county) * packed.shape[2] + k);
    return Number.isNaN(number) ? 0 : change(row, number);
  };
  for (const [name, packed, words, by] of [["cover", byCover, "cover-text", "by crop"],
    ["age", byAge, "age-text", "by the day it left the ground"]]) {
    const columnsOfData = { x: days };
    for (let k = 0; k < packed.shape[2]; k += 1) {
      columnsOfData[`part${k}`] = days.map((_, offset) => part(packed, first + offset, k));
    }
    fill(name, columnsOfData, stamps[state.day], [words, `${unitOf(row)}, ${by}`], `c-${name}`,
      `What the crops added in ${county.name} on the days up to ${dayWords(state.day)}, ${by}; the numbers are in the table`);
  }
}

function standsHere() {
  return data.stands.list.map((stand, k) => ({ ...stand, k })).filter(
    (stand) => stand.county === data.counties[state.county].id);
}

function drawStandList() {
  const here = standsHere();
  $("stand").replaceChildren(...here.map((stand) => new Option(stand.text, stand.k)));
  $("stand").disabled = !here.length;
  state.stand = here.length ? here[0].k : null;
}

function drawSeason() {
  const depth = data.units.water_left_mm;
  const rain = data.units.rain_stand_mm;
  const count = data.stands.list.length;
  const line = (name, row) => (state.stand === null ? [] : stamps.map((_, day) => {
    const number = standLines[name].at(day * count + state.stand);
    return row ? change(row, number) : number;
  }));
  const x = state.stand === null ? [] : stamps;
  const now = stamps[state.day];
  const nothing = data.stands.leftOut ? "Its stands are in stand_daily.csv." : "This county has no stands.";
  const [held, stress] = [line("water_left_mm", depth), line("stress_mm", depth)];
  const told = state.stand === null ? nothing
    : `${data.stands.list[state.stand].text}; on ${dayWords(state.day)} ${withUnit(depth, held[state.day])} held, stress `
      + `begins below ${withUnit(depth, stress[state.day])}`;
  fill("water", { x, held, stress }, now, ["water-text", `Water held for the roots (${unitOf(depth)}). ${told}.`],
    "c-water", told);
  fill("given", { x, rain: line("rain_stand_mm", rain), given: line("irrigation_mm", rain) }, now,
    ["given-text", `Rain and irrigation (${unitOf(rain)})`], "c-given", `Rain and irrigation, ${told}`);
  fill("factors", { x, kcb: line("kcb"), ke: line("ke"), ks: line("ks") }, now, null, "c-factors",
    `Crop coefficients Kcb, Ke and Ks, ${told}`);
}

function drawCounty() {
  const county = data.counties[state.county];
  $("county-title").textContent = `${county.name}, ${dayWords(state.day)}`;
  const row = current();
  const said = remarks(state.day, state.county);
  $("county-text").textContent = `${row.label}: ${withUnit(row, people(row, si(row.name, state.day, state.county)))}. `
    + `How sure of the contribution: ${sureWords(state.day, state.county)}${said.length ? ` (${said.join("; ")})` : ""}.`;
  $("off-text").textContent = offWords();
  drawHours();
  drawEpisode();
  drawSeason();
}

// How far the estimate was off where it could be checked.
function offWords() {
  const row = data.units.contribution_c;
  const at = (name, day) => (day < 0 ? NaN : off[name].at(day * data.counties.length + state.county));
  const words = (number) => `${shown(row, Math.abs(change(row, number)))} ${unitOf(row)} ${number < 0 ? "below" : "above"}`;
  const [yesterday, bias] = [at("error", state.day - 1), at("bias", state.day)];
  const parts = [];
  if (!Number.isNaN(yesterday)) parts.push(`on the day before ${words(yesterday)} the observed one`);
  if (!Number.isNaN(bias)) parts.push(`as the mean of the seven days before ${words(bias)} it`);
  return parts.length ? `The estimated afternoon dew point was ${parts.join(", ")}.` : "";
}

// --- what people do ---

function draw() {
  drawWords();
  drawMap();
  drawTable();
  drawCounty();
}

function choose(place, scroll = false) {
  state.county = place;
  drawStandList();
  draw();
  if (scroll) $("county").scrollIntoView({ block: "start" });
}

function setDay(day) {
  state.day = Math.max(0, Math.min(data.dates.length - 1, day));
  $("day").value = state.day;
  draw();
}

if (data.daysLeftOut) {
  $("left-out").textContent = `This page holds ${data.dates.length} days; ${data.daysLeftOut} more are in county_daily.csv.`;
}
$("quantity").replaceChildren(...data.quantities.map((row) => new Option(row.label, row.name)));
$("units").value = state.units;
$("sure").replaceChildren(...data.confidence.words.map((words, code) => new Option(words, code)));
$("day").value = state.day;
$("day").addEventListener("input", () => setDay(Number($("day").value)));
$("before").addEventListener("click", () => setDay(state.day - 1));
$("after").addEventListener("click", () => setDay(state.day + 1));
$("quantity").addEventListener("change", () => {
  state.quantity = $("quantity").value;
  clearMark();
  draw();
});
$("units").addEventListener("change", () => {
  state.units = $("units").value;
  clearMark();
  draw();
});
$("threshold").addEventListener("input", () => {
  state.mark = $("threshold").value === "" ? null : Number($("threshold").value);
  drawWords();
  drawMap();
  drawTable();
});
$("colours").addEventListener("change", () => {
  state.colours = $("colours").value;
  drawMap();
});
$("filter").addEventListener("input", drawTable);
$("sure").addEventListener("change", drawTable);
$("stand").addEventListener("change", () => {
  state.stand = Number($("stand").value);
  drawSeason();
});

// A mark in another unit or of another quantity would mean something else.
function clearMark() {
  state.mark = null;
  $("threshold").value = "";
}

function most() {
  const numbers = data.counties.map((_, place) => si(state.quantity, state.day, place));
  return numbers.reduce((best, number, place) => (number > (numbers[best] || -Infinity) ? place : best), 0);
}

choose(most());
// The charts come when the library has built them.
let tries = 0;
const waiting = setInterval(() => {
  tries += 1;
  if (["water", "given", "factors", "cover", "age", "dew", "depth"].every((name) => model(`${name}-data`)) || tries > 100) {
    clearInterval(waiting);
    drawCounty();
    document.body.dataset.ready = "yes";
  }
}, 50);
