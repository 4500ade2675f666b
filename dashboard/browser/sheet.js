// The sheet: takes a page as HTML text and changes only what differs, so that nothing flickers, scrolls away or loses focus.
// What a person does leaves as one trigger, {do, ..., command}; the command's id is the client's own, so a doubled click is one command.
// Ages tick here, and here it is noticed when no more pages arrive.

const SHEETS = new WeakMap();
const LOST_SOON = 5;

export default function (component) {
  const { data, parentElement, setTriggerValue, setStateValue } = component;
  let sheet = SHEETS.get(parentElement);
  if (!sheet) {
    sheet = new Sheet(parentElement);
    SHEETS.set(parentElement, sheet);
  }
  sheet.act = (value) => setTriggerValue("act", value);
  sheet.keep = (value) => setStateValue("width", value);
  sheet.show(data);
  return () => {
    sheet.stop();
    SHEETS.delete(parentElement);
  };
}

class Sheet {
  constructor(parent) {
    this.root = document.createElement("div");
    this.root.className = "sheet";
    parent.appendChild(this.root);
    this.html = null;
    this.root.addEventListener("click", (event) => this.click(event));
    this.timer = setInterval(() => this.tick(), 1000);
    this.charts = new ChartPointer(this);
    this.observer = new ResizeObserver(() => this.measure());
    this.observer.observe(this.root);
    this.dark = window.matchMedia("(prefers-color-scheme: dark)");
    this.rescheme = () => this.scheme();
    this.dark.addEventListener("change", this.rescheme);
  }

  show(data) {
    this.data = data;
    this.arrived = performance.now();
    this.scheme();
    if (data.html !== this.html) {
      const next = document.createElement("template");
      next.innerHTML = data.html;
      morphChildren(this.root, next.content);
      this.html = data.html;
      if (this.page !== undefined && this.page !== data.page) this.toTop();
      this.page = data.page;
      this.measure();
    }
    this.tick();
  }

  toTop() {
    const host = this.root.getRootNode().host || this.root;
    const scroller = host.closest("[data-testid=stMain]");
    if (scroller) scroller.scrollTo(0, 0);
  }

  scheme() {
    if (!this.data) return;
    let scheme = this.data.scheme;
    if (scheme === "reader") {
      // Streamlit tells its theme by custom properties; the ground's brightness says which of our two sets goes with it.
      const ground = getComputedStyle(this.root).getPropertyValue("--st-background-color").trim();
      scheme = isDark(ground) ? "dusk" : "day";
    }
    if (this.root.dataset.scheme !== scheme) this.root.dataset.scheme = scheme;
  }

  tick() {
    if (!this.data) return;
    const silence = (performance.now() - this.arrived) / 1000;
    const now = this.data.now + silence;
    this.root.classList.toggle("lost", silence > this.data.lost_after || (silence > LOST_SOON && !isConnected()));
    for (const node of this.root.querySelectorAll("[data-at]")) {
      const age = now - Number(node.dataset.at);
      setText(node, words(age, this.data.ages));
      if (node.dataset.stale) node.classList.toggle("stale", age > Number(node.dataset.stale));
    }
    for (const node of this.root.querySelectorAll("[data-clock]")) setText(node, clock(now, this.data.zone, node.dataset.clock));
  }

  measure() {
    const place = this.root.querySelector("[data-measure]");
    if (!place || !place.clientWidth) return;
    const width = Math.max(280, Math.round(place.clientWidth / 20) * 20);
    if (width !== this.width) {
      this.width = width;
      if (width !== this.data.width) this.keep(width);
    }
  }

  click(event) {
    const target = event.target.closest("[data-do]");
    if (!target || event.metaKey || event.ctrlKey || event.shiftKey) return;
    event.preventDefault();
    if (target.hasAttribute("disabled")) return;
    if (target.dataset.do === "picture") {
      takePicture(this.root, target.dataset.name, target.dataset.title);
      return;
    }
    if (target.dataset.once !== undefined) {
      // Pressed is pressed: it can not be pressed twice while the answer is on its way.
      target.setAttribute("disabled", "");
      target.setAttribute("aria-busy", "true");
    }
    this.act({ ...target.dataset, command: uuid() });
  }

  stop() {
    clearInterval(this.timer);
    this.observer.disconnect();
    this.dark.removeEventListener("change", this.rescheme);
    this.root.remove();
  }
}

// --- changing only what differs -----------------------------------------------------------------

function morphChildren(from, to) {
  const old = new Map();
  for (const child of from.children) if (child.dataset && child.dataset.k) old.set(child.dataset.k, child);
  let at = from.firstChild;
  for (const wanted of [...to.childNodes]) {
    const key = wanted.dataset && wanted.dataset.k;
    let match = key ? old.get(key) : at;
    if (!key && match && match.dataset && match.dataset.k) match = null;
    if (match && alike(match, wanted)) {
      if (match !== at) from.insertBefore(match, at);
      else at = at.nextSibling;
      morph(match, wanted);
    } else {
      from.insertBefore(wanted, at);
    }
  }
  while (at) {
    const next = at.nextSibling;
    at.remove();
    at = next;
  }
}

function alike(one, other) {
  return one.nodeType === other.nodeType && one.nodeName === other.nodeName;
}

function morph(from, to) {
  if (from.nodeType === Node.TEXT_NODE) {
    if (from.data !== to.data) from.data = to.data;
    return;
  }
  if (from.nodeType !== Node.ELEMENT_NODE || from.isEqualNode(to)) return;
  if (from.namespaceURI === "http://www.w3.org/2000/svg" && from.nodeName === "svg") {
    from.replaceWith(to);
    return;
  }
  for (const { name, value } of [...to.attributes]) if (from.getAttribute(name) !== value) from.setAttribute(name, value);
  for (const { name } of [...from.attributes]) if (!to.hasAttribute(name)) from.removeAttribute(name);
  // What ticks by itself, and what a pointer has drawn, is not the server's to change.
  if (from.dataset.at || from.dataset.clock || from.dataset.own !== undefined) return;
  morphChildren(from, to);
}

// Whether the frame around us still speaks with the board; a board that hangs is noticed by its silence alone.
function isConnected() {
  const app = document.querySelector("[data-test-connection-state]");
  return !app || app.getAttribute("data-test-connection-state") === "CONNECTED";
}

// --- words and colours -----------------------------------------------------------------

function setText(node, text) {
  if (node.textContent !== text) node.textContent = text;
}

function words(seconds, ages) {
  if (seconds < -120) return ages.ahead;
  if (seconds < 1) return ages.just_now;
  for (const [limit, key, unit] of [[120, "seconds_ago", 1], [7200, "minutes_ago", 60], [172800, "hours_ago", 3600]])
    if (seconds < limit) return ages[key].replace("{n}", Math.floor(seconds / unit));
  return ages.days_ago.replace("{n}", Math.floor(seconds / 86400));
}

const FORMATS = new Map();

function format(zone, options) {
  const key = zone + JSON.stringify(options);
  if (!FORMATS.has(key)) FORMATS.set(key, new Intl.DateTimeFormat("en-GB", { timeZone: zone, hourCycle: "h23", ...options }));
  return FORMATS.get(key);
}

function clock(seconds, zone, weekdays) {
  const date = new Date(seconds * 1000);
  const time = format(zone, { hour: "2-digit", minute: "2-digit" }).format(date);
  if (!weekdays.includes(" ")) return time;
  const parts = format(zone, { year: "numeric", month: "2-digit", day: "2-digit" }).format(date).split("/").map(Number);
  const day = (new Date(Date.UTC(parts[2], parts[1] - 1, parts[0])).getUTCDay() + 6) % 7;
  return weekdays.split(" ")[day] + " " + time;
}

function isDark(colour) {
  const hex = /^#([0-9a-f]{2})([0-9a-f]{2})([0-9a-f]{2})/i.exec(colour);
  const parts = hex ? hex.slice(1).map((part) => parseInt(part, 16)) : (colour.match(/\d+/g) || [255, 255, 255]).map(Number);
  return 0.299 * parts[0] + 0.587 * parts[1] + 0.114 * parts[2] < 128;
}

function uuid() {
  // crypto.randomUUID is only there over https and on localhost; a board in the hall is often neither.
  const bytes = crypto.getRandomValues(new Uint8Array(16));
  bytes[6] = (bytes[6] & 0x0f) | 0x40;
  bytes[8] = (bytes[8] & 0x3f) | 0x80;
  const hex = [...bytes].map((byte) => byte.toString(16).padStart(2, "0")).join("");
  return `${hex.slice(0, 8)}-${hex.slice(8, 12)}-${hex.slice(12, 16)}-${hex.slice(16, 20)}-${hex.slice(20)}`;
}

// Save the chart as a PNG of twice its size. Colours are custom properties of the sheet: an image of its own does not know them.
function takePicture(root, name, title) {
  const svg = root.querySelector("svg.plot");
  if (!svg) return;
  const style = getComputedStyle(root);
  const colour = (_, variable) => style.getPropertyValue(variable).trim().replaceAll('"', "'");
  const { width, height } = svg.viewBox.baseVal;
  const copy = svg.cloneNode(true);
  for (const own of copy.querySelectorAll(".hair,.brush")) own.remove();
  copy.setAttribute("xmlns", "http://www.w3.org/2000/svg");
  const head = 34;
  copy.setAttribute("viewBox", `0 ${-head} ${width} ${height + head}`);
  copy.setAttribute("width", width * 2);
  copy.setAttribute("height", (height + head) * 2);
  const rules = `text{font-family:${style.getPropertyValue("--sans")};font-size:11px;fill:var(--ink2)}`;
  const ground = `<rect y="${-head}" width="${width}" height="${height + head}" fill="var(--sheet)"/>`;
  const face = `font:600 16px ${style.getPropertyValue("--serif").replaceAll('"', "'")};fill:var(--ink)`;
  copy.insertAdjacentHTML("afterbegin", `<style>${rules}</style>${ground}<text class="title" x="12" y="${24 - head}" style="${face}"></text>`);
  copy.querySelector(".title").textContent = title;
  const text = new XMLSerializer().serializeToString(copy).replace(/var\((--[a-z0-9]+)\)/g, colour);
  const image = new Image();
  image.onload = () => {
    const canvas = document.createElement("canvas");
    canvas.width = width * 2;
    canvas.height = (height + head) * 2;
    canvas.getContext("2d").drawImage(image, 0, 0);
    const link = document.createElement("a");
    link.href = canvas.toDataURL("image/png");
    link.download = name;
    link.click();
  };
  image.src = `data:image/svg+xml;charset=utf-8,${encodeURIComponent(text)}`;
}

// --- reading values off a chart, and choosing a stretch of time -----------------------------------------------------------------

class ChartPointer {
  constructor(sheet) {
    this.sheet = sheet;
    const root = sheet.root;
    root.addEventListener("pointermove", (event) => this.move(event));
    root.addEventListener("pointerdown", (event) => this.down(event));
    root.addEventListener("pointerup", (event) => this.up(event));
    root.addEventListener("pointerleave", () => this.hide());
    root.addEventListener("pointercancel", () => this.hide());
    root.addEventListener("keydown", (event) => this.key(event));
  }

  // Return the chart under an event, with the place in its own pixels.
  at(event) {
    const box = event.target.closest && event.target.closest(".chart");
    if (!box) return null;
    const svg = box.querySelector("svg.plot");
    if (!svg) return null;
    const rect = svg.getBoundingClientRect();
    const x = ((event.clientX - rect.left) / rect.width) * svg.viewBox.baseVal.width;
    return this.place(box, svg, x);
  }

  place(box, svg, x) {
    const left = Number(svg.dataset.left);
    const right = Number(svg.dataset.right);
    const from = Number(svg.dataset.from);
    const to = Number(svg.dataset.to);
    x = Math.min(Math.max(x, left), right);
    return { box, svg, x, left, right, time: from + ((x - left) / (right - left)) * (to - from) };
  }

  move(event) {
    const place = this.at(event);
    if (!place) {
      this.hide();
      return;
    }
    this.read(place);
    if (this.start && this.start.svg === place.svg) this.brush(this.start.x, place.x);
  }

  down(event) {
    const place = this.at(event);
    if (!place || event.button !== 0) return;
    this.start = event.pointerType === "touch" ? null : place;
    this.read(place);
  }

  up(event) {
    const start = this.start;
    const place = this.at(event);
    this.start = null;
    this.hide();
    if (!start || !place || Math.abs(place.x - start.x) < 8) return;
    const [from, to] = [start.time, place.time].sort((a, b) => a - b);
    this.sheet.act({ do: "span", from: from.toFixed(3), to: to.toFixed(3), command: uuid() });
  }

  key(event) {
    const box = event.target.closest && event.target.closest(".chart");
    if (!box || !["ArrowLeft", "ArrowRight", "Escape"].includes(event.key)) return;
    event.preventDefault();
    if (event.key === "Escape") {
      this.hide();
      return;
    }
    const svg = box.querySelector("svg.plot");
    const step = (event.key === "ArrowLeft" ? -1 : 1) * (event.shiftKey ? 40 : 4);
    this.read(this.place(box, svg, (this.cursor === undefined ? Number(svg.dataset.right) : this.cursor) + step));
  }

  layer(svg, name, tag) {
    let node = svg.querySelector("." + name);
    if (!node) {
      node = document.createElementNS("http://www.w3.org/2000/svg", tag);
      node.setAttribute("class", name);
      node.setAttribute("pointer-events", "none");
      svg.appendChild(node);
    }
    return node;
  }

  read(place) {
    const { box, svg, x, time } = place;
    this.cursor = x;
    const hair = this.layer(svg, "hair", "path");
    hair.setAttribute("d", `M${x.toFixed(1)} ${svg.dataset.top}V${svg.dataset.bottom}`);
    hair.style.display = "block";
    let note = box.querySelector(".readout");
    if (!note) {
      note = document.createElement("div");
      note.className = "readout";
      note.dataset.own = "";
      note.setAttribute("role", "status");
      box.appendChild(note);
    }
    const lines = [`<b>${when(time, this.sheet.data.zone, svg)}</b>`];
    for (const panel of svg.querySelectorAll(".panel-plot")) {
      const value = valueAt(panel, x);
      if (value === null) continue;
      const text = document.createElement("span");
      text.textContent = `${panel.dataset.name} ${value.toFixed(Number(panel.dataset.decimals)).replace("-", "\u2212")} ${panel.dataset.unit}`;
      lines.push(text.innerHTML);
    }
    note.innerHTML = lines.join("<br>");
    note.style.display = "block";
    const scale = svg.getBoundingClientRect().width / svg.viewBox.baseVal.width;
    const at = x * scale;
    note.style.left = at + 14 + note.offsetWidth > box.clientWidth ? `${Math.max(0, at - note.offsetWidth - 12)}px` : `${at + 12}px`;
    note.style.top = `${Number(svg.dataset.top) * scale + 4}px`;
  }

  brush(one, other) {
    const svg = this.start.svg;
    const node = this.layer(svg, "brush", "rect");
    node.setAttribute("x", Math.min(one, other));
    node.setAttribute("width", Math.abs(one - other));
    node.setAttribute("y", svg.dataset.top);
    node.setAttribute("height", Number(svg.dataset.bottom) - Number(svg.dataset.top));
    node.style.display = "block";
  }

  hide() {
    for (const node of this.sheet.root.querySelectorAll(".hair,.brush,.readout")) node.style.display = "none";
    this.cursor = undefined;
  }
}

// Return the value of the drawn point nearest to x, read back through the panel's own axis; null in a gap.
function valueAt(panel, x) {
  let best = null;
  let distance = 9;
  for (const line of panel.querySelectorAll("polyline.line,polyline.projection")) {
    const points = line.points;
    let low = 0;
    let high = points.numberOfItems - 1;
    while (high - low > 1) {
      const middle = (low + high) >> 1;
      if (points.getItem(middle).x < x) low = middle;
      else high = middle;
    }
    const a = points.getItem(low);
    const b = points.getItem(high);
    if (x >= a.x && x <= b.x && b.x > a.x) {
      best = a.y + ((x - a.x) / (b.x - a.x)) * (b.y - a.y);
      break;
    }
    for (const point of [a, b])
      if (Math.abs(point.x - x) < distance) {
        distance = Math.abs(point.x - x);
        best = point.y;
      }
  }
  if (best === null) return null;
  const top = Number(panel.dataset.top);
  const bottom = Number(panel.dataset.bottom);
  const low = Number(panel.dataset.low);
  const high = Number(panel.dataset.high);
  return high - ((best - top) / (bottom - top)) * (high - low);
}

function when(seconds, zone, svg) {
  const span = Number(svg.dataset.to) - Number(svg.dataset.from);
  const options = { hour: "2-digit", minute: "2-digit" };
  if (span < 3 * 3600) options.second = "2-digit";
  if (span > 20 * 3600) Object.assign(options, { day: "numeric", month: "short" });
  if (span > 300 * 86400) options.year = "numeric";
  return format(zone, options).format(new Date(seconds * 1000)).replace(",", "");
}
