"use strict";
(() => {
  const data = JSON.parse(document.getElementById("data").textContent);
  const start = Date.parse(data.start);
  const $ = (id) => document.getElementById(id);
  const all = (query, root = document) => [...root.querySelectorAll(query)];
  const SVG = "http://www.w3.org/2000/svg";
  let chosen = -1, zone = "", zoneLabel = "", shown = 0;

  // ---- words -------------------------------------------------------------------------------------------------
  const pad = (n) => String(n).padStart(2, "0");
  const utc = (s, seconds = true) => {
    const d = new Date(start + s * 1000);
    return pad(d.getUTCHours()) + ":" + pad(d.getUTCMinutes()) + (seconds ? ":" + pad(d.getUTCSeconds()) : "");
  };
  const day = (s) => new Date(start + s * 1000).toISOString().slice(0, 10);
  const volume = (mb) => mb >= 1e6 ? (mb / 1e6).toFixed(2) + " TB" : mb >= 1e3 ? (mb / 1e3).toFixed(2) + " GB" : mb.toFixed(1) + " MB";
  const rateWords = (r) => r >= 1 ? Number(r.toPrecision(3)) + " Mbit/s" : Number((r * 1e3).toPrecision(3)) + " kbit/s";
  const formats = {};
  function local(s, options) {
    const key = zone + JSON.stringify(options);
    formats[key] = formats[key] || new Intl.DateTimeFormat("en-GB", { ...options, timeZone: zone, hourCycle: "h23" });
    return formats[key].format(new Date(start + s * 1000));
  }

  // ---- drawing -----------------------------------------------------------------------------------------------
  function make(name, attributes, parent, text) {
    const node = document.createElementNS(SVG, name);
    for (const key in attributes) node.setAttribute(key, attributes[key]);
    if (text !== undefined) node.textContent = text;
    if (parent) parent.appendChild(node);
    return node;
  }
  function at(xs, ys, x) {
    if (!xs.length || !ys.length) return NaN;
    let i = 1;
    while (i < xs.length - 1 && xs[i] < x) i++;
    if (xs.length < 2) return ys[0];
    const part = Math.min(Math.max((x - xs[i - 1]) / (xs[i] - xs[i - 1] || 1), 0), 1);
    return ys[i - 1] + part * (ys[i] - ys[i - 1]);
  }
  // Azimuths go round: the shorter way from one sample to the next.
  function azimuthAt(c, t) {
    const turned = c.turned || (c.turned = c.az.reduce((out, az, i) => {
      out.push(i ? out[i - 1] + ((az - out[i - 1]) % 360 + 540) % 360 - 180 : az);
      return out;
    }, []));
    return ((at(c.t, turned, t) % 360) + 360) % 360;
  }
  function maskAt(mask, azimuth) {
    for (let i = 0; i + 1 < mask.length; i += 2) {
      const [a, x] = mask[i], [b, y] = mask[i + 1];
      if (azimuth >= a && azimuth <= b) return b > a ? x + (y - x) * (azimuth - a) / (b - a) : y;
    }
    return 0;
  }
  const COMPASS = ["N", "NE", "E", "SE", "S", "SW", "W", "NW"];

  function panorama(c, width, height) {
    const box = { top: 16, bottom: height - 22, left: 30, right: width - 6 };
    const svg = make("svg", { viewBox: `0 0 ${width} ${height}`, class: "panorama" });
    const antenna = data.antennas[c.a], site = data.sites[antenna.site], middle = (c.from + c.to) / 2;
    const centre = azimuthAt(c, middle), span = box.right - box.left, tall = box.bottom - box.top;
    const x = (az) => box.left + span * ((((az - centre + 180) % 360) + 360) % 360) / 360;
    const y = (el) => box.bottom - tall * Math.max(el, 0) / 90;
    const sunAt = (t) => {
      const i = Math.min(Math.max(Math.floor(t / site.step), 0), site.sun.length / 2 - 2), part = t / site.step - i;
      const turn = ((site.sun[2 * i + 2] - site.sun[2 * i]) % 360 + 540) % 360 - 180;
      return [site.sun[2 * i] + part * turn, site.sun[2 * i + 1] + part * (site.sun[2 * i + 3] - site.sun[2 * i + 1])];
    };
    const sun = site.sun.length ? sunAt(middle) : null;
    const light = sun && sun[1] > 0 ? " day" : sun && sun[1] < -6 ? " night" : "";
    make("rect", { x: box.left, y: box.top, width: span, height: tall, class: "air" + light }, svg);
    for (const el of [0, 30, 60, 90]) {
      make("path", { d: `M${box.left} ${y(el)}H${box.right}`, class: "rule" + (el ? "" : " base") }, svg);
      make("text", { x: box.left - 5, y: y(el) + 4, "text-anchor": "end" }, svg, el + "°");
    }
    for (let az = 0; az < 360; az += 45) {
      const edge = x(az) - box.left < 12 || box.right - x(az) < 12;
      if (!edge) make("text", { x: x(az), y: height - 6, "text-anchor": "middle", class: az % 90 ? "" : "strong" }, svg, span > 480 ? COMPASS[az / 45] + " " + az + "°" : COMPASS[az / 45]);
      make("path", { d: `M${x(az)} ${box.bottom}v4`, class: "rule base" }, svg);
    }
    const line = (points, name) => {
      let d = "", last = NaN;
      for (const [az, el] of points) {
        const px = x(az);
        d += (d && Math.abs(px - last) < span / 2 ? "L" : "M") + px.toFixed(1) + " " + y(el).toFixed(1);
        last = px;
      }
      return d && make("path", { d, class: name }, svg);
    };
    if (sun) {
      const points = [];
      const drawSun = () => { if (points.length > 1) line(points.splice(0), "sun-path"); else points.length = 0; };
      for (let t = middle - 43200; t <= middle + 43200; t += 900) {
        if (t < 0 || t > data.horizon) continue;
        const p = sunAt(t);
        if (p[1] > 0) points.push(p); else drawSun();
      }
      drawSun();
    }
    let ground = `M${box.left} ${box.bottom}`;
    for (let step = 0; step <= 360; step++) {
      const az = (centre - 180 + step + 720) % 360;
      ground += `L${(box.left + span * step / 360).toFixed(1)} ${y(maskAt(antenna.mask, az)).toFixed(1)}`;
    }
    make("path", { d: ground + `V${box.bottom}Z`, class: "skyline" }, svg);
    if (sun && sun[1] > -0.8) {
      make("circle", { cx: x(sun[0]), cy: y(sun[1]), r: 7, class: "sun" }, svg);
      const right = x(sun[0]) < box.right - 60;
      make("text", { x: x(sun[0]) + (right ? 11 : -11), y: y(sun[1]) + 4, "text-anchor": right ? "start" : "end", class: "note" }, svg, "sun " + sun[1].toFixed(0) + "°");
    }
    const inside = (from, to) => {
      const times = [from, ...c.t.filter((t) => t > from && t < to), to];
      // Between thinned samples a steep pass swings far in azimuth, so the curve is cut finer there.
      return times.flatMap((t, i) => i ? [0.25, 0.5, 0.75, 1].map((p) => times[i - 1] + p * (t - times[i - 1])) : [t])
        .map((t) => [azimuthAt(c, t), at(c.t, c.el, t)]);
    };
    const first = c.t[0], last = c.t[c.t.length - 1];
    line(inside(first, last), "path-all");
    line(inside(Math.max(c.from, first), Math.min(c.to, last)), "path-contact");
    for (const [a, b] of c.keyholes || []) line(inside(a, b), "path-keyhole");
    const narrow = span < 480;
    const ends = [[Math.max(c.from, first), "from "], [Math.min(c.to, last), "to "]]
      .map(([t, word]) => ({ px: x(azimuthAt(c, t)), py: y(at(c.t, c.el, t)), text: word + utc(t, !narrow) }))
      .sort((a, b) => a.px - b.px);
    ends.forEach((end, i) => {
      make("circle", { cx: end.px, cy: end.py, r: 4.5, class: "dot" }, svg);
      // The left end speaks to the left and the right one to the right, where there is room for it.
      const room = narrow ? 66 : 100;
      const right = i ? end.px < box.right - room : end.px < box.left + room;
      const lift = i && right === (ends[0].px < box.left + room) && end.px - ends[0].px < room ? 24 : 9;
      make("text", { x: end.px + (right ? 9 : -9), y: Math.max(end.py - lift, box.top + 10), "text-anchor": right ? "start" : "end", class: "note strong" }, svg, end.text);
    });
    const cursor = make("circle", { r: 6, class: "cursor-dot", visibility: "hidden" }, svg);
    return { svg, show: (t) => { cursor.setAttribute("visibility", "visible"); cursor.setAttribute("cx", x(azimuthAt(c, t))); cursor.setAttribute("cy", y(at(c.t, c.el, t))); } };
  }

  function chart(c, width, height, title, values, options) {
    const box = { top: 18, bottom: height - (options.times ? 20 : 6), left: 30, right: width - 6 };
    const svg = make("svg", { viewBox: `0 0 ${width} ${height}`, class: "chart" });
    const first = c.t[0], last = c.t[c.t.length - 1];
    const x = (t) => box.left + (box.right - box.left) * (t - first) / (last - first || 1);
    const low = Math.min(0, ...values), high = Math.max(options.least || 0, ...values) * 1.06 || 1;
    const y = (v) => box.bottom - (box.bottom - box.top) * (v - low) / (high - low || 1);
    make("rect", { x: x(Math.max(c.from, first)), y: box.top, width: Math.max(x(Math.min(c.to, last)) - x(Math.max(c.from, first)), 1), height: box.bottom - box.top, class: "band" }, svg);
    const step = [0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000].find((n) => (high - low) / n <= 4) || 5000;
    for (let v = Math.ceil(low / step) * step; v <= high; v += step) {
      make("path", { d: `M${box.left} ${y(v)}H${box.right}`, class: "rule" + (v ? "" : " base") }, svg);
      make("text", { x: box.left - 5, y: y(v) + 4, "text-anchor": "end" }, svg, Number(v.toFixed(6)));
    }
    if (options.steps) {
      const area = (from, to, cap, name) => {
        const times = [from, ...c.t.filter((t) => t > from && t < to), to];
        let d = `M${x(from)} ${y(0)}`;
        for (let i = 0; i + 1 < times.length; i++) {
          const k = c.t.findLastIndex((t) => t <= times[i]);
          const v = cap === null ? values[Math.max(k, 0)] : cap;
          d += `V${y(v)}H${x(times[i + 1])}`;
        }
        make("path", { d: d + `V${y(0)}Z`, class: name }, svg);
      };
      area(first, last, null, "sky");
      for (const [a, b, r] of c.sent) area(a, b, r, "used");
    } else {
      make("path", { d: values.map((v, i) => (i ? "L" : "M") + x(c.t[i]).toFixed(1) + " " + y(v).toFixed(1)).join(""), class: "curve" }, svg);
      make("path", { d: `M${box.left} ${y(data.required)}H${box.right}`, class: "asked" }, svg);
      make("text", { x: box.right, y: y(data.required) - 4, "text-anchor": "end", class: "note" }, svg, `asked ${data.required} dB`);
    }
    make("text", { x: box.left, y: 11, class: "strong" }, svg, title);
    if (options.times) {
      const gap = [10, 30, 60, 120, 300, 600, 1800, 3600, 7200, 14400].find((n) => (last - first) / n <= (width > 500 ? 9 : 4)) || 28800;
      for (let t = Math.ceil(first / gap) * gap; t <= last; t += gap) {
        if (x(t) > box.left + 8 && x(t) < box.right - 18) make("text", { x: x(t), y: height - 5, "text-anchor": "middle" }, svg, utc(t, gap < 60));
        make("path", { d: `M${x(t)} ${box.bottom}v4`, class: "rule base" }, svg);
      }
    }
    const cursor = make("path", { class: "cursor", visibility: "hidden" }, svg);
    return {
      svg, show: (t) => { cursor.setAttribute("visibility", "visible"); cursor.setAttribute("d", `M${x(t)} ${box.top}V${box.bottom}`); },
      time: (px) => first + (last - first) * Math.min(Math.max((px - box.left) / (box.right - box.left), 0), 1),
    };
  }

  // ---- the contact -------------------------------------------------------------------------------------------
  let drawings = [], reading = 0;
  function read(t) {
    const c = data.contacts[chosen];
    reading = Math.min(Math.max(t, c.t[0]), c.t[c.t.length - 1]);
    drawings.forEach((one) => one.show(reading));
    const k = c.t.findLastIndex((time) => time <= reading + 0.01), margin = at(c.t, c.db, reading);
    $("readout").textContent = `${utc(reading)} UTC · azimuth ${azimuthAt(c, reading).toFixed(1)}° · elevation ${at(c.t, c.el, reading).toFixed(1)}° · ` +
      `range ${at(c.t, c.km, reading).toFixed(0)} km` + (isNaN(margin) ? "" : ` · margin ${margin.toFixed(1)} dB`) +
      (c.service === "command" ? "" : ` · link allows ${rateWords(c.rate[Math.max(k, 0)])}`);
  }
  function draw() {
    const c = data.contacts[chosen], room = $("charts");
    room.textContent = "";
    drawings = [];
    if (!c.t) { $("readout").textContent = "No track is known for this contact."; return; }
    const width = Math.max(Math.round(room.clientWidth || 900), 260), phone = width < 500;
    drawings.push(panorama(c, width, phone ? 190 : 270));
    const sends = c.service !== "command";
    if (c.db.length) drawings.push(chart(c, width, phone ? 96 : 118, `Margin, dB, ${c.modcod || "command"}`, c.db, { least: data.required, times: !sends }));
    if (sends) drawings.push(chart(c, width, phone ? 110 : 130, "Rate, Mbit/s: allowed, and used", c.rate, { steps: true, times: true }));
    drawings.forEach((one) => {
      room.appendChild(one.svg);
      if (one.time) one.svg.addEventListener("pointermove", (event) => {
        const frame = one.svg.getBoundingClientRect();
        read(one.time((event.clientX - frame.left) * width / frame.width));
      });
    });
    reading = (c.from + c.to) / 2;
  }
  function fact(list, name, value) {
    if (value === "" || value === null || value === undefined) return;
    const term = document.createElement("dt"), detail = document.createElement("dd");
    term.textContent = name;
    detail.dir = "auto";
    detail.textContent = value;
    list.append(term, detail);
  }
  function choose(i, move) {
    if (!(i >= 0 && i < data.contacts.length)) return;
    const c = data.contacts[i], antenna = data.antennas[c.a];
    chosen = i;
    $("contact").hidden = false;
    all(".chosen").forEach((node) => node.classList.remove("chosen"));
    all(`[data-c="${i}"]`).forEach((node) => node.classList.add("chosen"));
    $("contact-title").textContent = `\u2068${data.spacecraft[c.s]}\u2069 on \u2068${antenna.name}\u2069, ${day(c.from)} ${utc(c.from)} to ${utc(c.to)} UTC`;
    const list = $("contact-facts");
    list.textContent = "";
    fact(list, "Contact", c.id);
    fact(list, "Site", data.sites[antenna.site].name);
    if (zone) fact(list, zoneLabel, local(c.from, { hour: "2-digit", minute: "2-digit", second: "2-digit" }) + " to " + local(c.to, { hour: "2-digit", minute: "2-digit", second: "2-digit" }));
    fact(list, "Lasts", ((c.to - c.from) / 60).toFixed(1) + " min");
    fact(list, "Service", c.service === "both" ? "downlink and command" : c.service);
    fact(list, "Radio", `${c.radio}, ${c.mhz} MHz ${c.polarisation}`);
    fact(list, "Modcod", c.modcod);
    fact(list, "Rate", [...new Set(c.sent.filter((p) => p[2]).map((p) => rateWords(p[2])))].join(", "));
    if (c.service !== "command") fact(list, "Volume", volume(c.mb));
    fact(list, "Least margin", c.margin === null ? "" : c.margin.toFixed(2) + " dB");
    fact(list, "Peak", c.peak === null ? "" : c.peak.toFixed(1) + "°");
    fact(list, "Value", c.value ? c.value.toLocaleString("en") : "");
    fact(list, "Cost", c.cost ? c.cost.toLocaleString("en") : "");
    fact(list, "Origin", c.origin);
    fact(list, "Change", c.change);
    fact(list, "Cut", c.cut.replaceAll("_", " "));
    draw();
    $("charts").setAttribute("aria-label", `Horizon panorama, margin and rate of ${data.spacecraft[c.s]} on ${antenna.name}`);
    if (move) {
      $("contact").scrollIntoView({ block: "nearest" });
      $("h-contact").focus({ preventScroll: true });
    }
  }
  const visible = (i) => !$("c" + i).hidden;
  function next(step) {
    let i = chosen;
    do i += step; while (i >= 0 && i < data.contacts.length && !visible(i));
    if (i >= 0 && i < data.contacts.length) choose(i, false);
  }
  document.addEventListener("click", (event) => {
    const link = event.target.closest("a[data-c]");
    if (!link || event.ctrlKey || event.metaKey || event.shiftKey) return;
    event.preventDefault();
    choose(Number(link.dataset.c), true);
    history.replaceState(null, "", "#c" + link.dataset.c);
  });
  $("before").addEventListener("click", () => next(-1));
  $("after").addEventListener("click", () => next(1));
  $("charts").addEventListener("keydown", (event) => {
    const c = data.contacts[chosen], way = { ArrowLeft: -1, ArrowRight: 1 }[event.key];
    if (!way || !c || !c.t) return;
    event.preventDefault();
    read(reading + way * (event.shiftKey ? 60 : 10));
  });
  // Arrow keys walk along the marks of a ribbon; only the first of each is a tab stop.
  all(".lane-body").forEach((body) => all(".mark", body).forEach((mark, i) => { mark.tabIndex = i ? -1 : 0; }));
  document.addEventListener("keydown", (event) => {
    const mark = event.target.closest && event.target.closest(".mark"), way = { ArrowLeft: -1, ArrowRight: 1 }[event.key];
    if (!mark || !way) return;
    event.preventDefault();
    const row = all(".mark:not(.off)", mark.parentElement), other = row[row.indexOf(mark) + way];
    if (other) { mark.tabIndex = -1; other.tabIndex = 0; other.focus(); }
  });

  // ---- filters -----------------------------------------------------------------------------------------------
  const wanted = (id) => $(id).value === "" ? null : Number($(id).value);
  function fits(s, a, want) {
    return (want.s === null || s === want.s) && (want.a === null || a === want.a) && (want.g === null || data.antennas[a].site === want.g);
  }
  function filter() {
    const want = { s: wanted("f-s"), a: wanted("f-a"), g: wanted("f-g") };
    let count = 0;
    data.contacts.forEach((c, i) => {
      const fit = fits(c.s, c.a, want);
      $("c" + i).hidden = !fit;
      count += fit;
    });
    all(".mark").forEach((mark) => { const c = data.contacts[mark.dataset.c]; mark.classList.toggle("off", !fits(c.s, c.a, want)); });
    all(".lane[data-a]").forEach((lane) => { const a = Number(lane.dataset.a); lane.hidden = !fits(want.s, a, want); });
    all(".lane[data-s]").forEach((lane) => { lane.hidden = want.s !== null && Number(lane.dataset.s) !== want.s; });
    all(".lane[data-a] path[data-s]").forEach((path) => path.classList.toggle("off", want.s !== null && Number(path.dataset.s) !== want.s));
    all(".lane[data-s] path[data-a]").forEach((path) => path.classList.toggle("off", !fits(want.s, Number(path.dataset.a), want)));
    all(".bars tr[data-a]").forEach((row) => { row.hidden = !fits(want.s, Number(row.dataset.a), want); });
    $("count").textContent = count + (count === 1 ? " contact" : " contacts");
    listUnused(true);
  }
  ["f-s", "f-a", "f-g"].forEach((id) => $(id).addEventListener("change", filter));

  // ---- unused windows: many, so rows appear by the hundred ------------------------------------------------------
  function listUnused(afresh) {
    if (!$("unused").open) return;
    const want = { s: wanted("f-s"), a: wanted("f-a"), g: wanted("f-g") }, reason = $("f-r").value;
    const rows = data.unused.filter((u) => fits(u[0], u[1], want) && (!reason || u[4] === reason));
    if (afresh) { $("unused-rows").textContent = ""; shown = 0; }
    for (const u of rows.slice(shown, shown + 200)) {
      const row = document.createElement("tr");
      for (const text of [day(u[2]) + " " + utc(u[2]), utc(u[3]), data.antennas[u[1]].name, data.spacecraft[u[0]], u[4].replaceAll("_", " ") + ": " + u[5]]) {
        const cell = document.createElement("td");
        cell.dir = "auto";
        cell.textContent = text;
        row.appendChild(cell);
      }
      $("unused-rows").appendChild(row);
    }
    shown = Math.min(shown + 200, rows.length);
    $("more").hidden = shown >= rows.length;
    $("more").textContent = `Show more (${rows.length - shown} left)`;
  }
  $("unused").addEventListener("toggle", () => listUnused(true));
  $("f-r").addEventListener("change", () => listUnused(true));
  $("more").addEventListener("click", () => listUnused(false));
  all("[data-reason]").forEach((button) => button.addEventListener("click", () => {
    $("f-r").value = button.dataset.reason;
    $("unused").open = true;
    listUnused(true);
    $("unused").scrollIntoView();
  }));

  // ---- time zone, zoom, look ---------------------------------------------------------------------------------
  function addZone(name, label) {
    try { new Intl.DateTimeFormat("en", { timeZone: name }); } catch { return; }
    const option = document.createElement("option");
    option.value = name;
    option.textContent = label;
    $("zone").appendChild(option);
  }
  const zones = new Map();
  data.sites.forEach((site) => { if (site.zone) zones.set(site.zone, [...(zones.get(site.zone) || []), site.name]); });
  zones.forEach((names, name) => addZone(name, "local time of " + names.join(", ")));
  const own = Intl.DateTimeFormat().resolvedOptions().timeZone;
  if (own && !zones.has(own)) addZone(own, "this device's time (" + own + ")");
  $("zone").addEventListener("change", () => {
    zone = $("zone").value;
    zoneLabel = zone ? $("zone").selectedOptions[0].textContent : "";
    all(".zone-cell").forEach((cell) => { cell.hidden = !zone; });
    all("th.zone-cell").forEach((cell) => { cell.textContent = zone ? "Start, " + zoneLabel : ""; });
    if (zone) all("#rows .zone-cell").forEach((cell, i) => { cell.textContent = local(data.contacts[i].from, { day: "2-digit", month: "short", hour: "2-digit", minute: "2-digit" }); });
    all(".zone-ruler").forEach((ruler) => {
      ruler.hidden = !zone;
      ruler.textContent = "";
      ruler.closest(".lane").classList.toggle("two", Boolean(zone));
      if (!zone) return;
      all("i", ruler.parentElement).forEach((tick, k, list) => {
        if (list.length > 13 && k % 2) return;
        const mark = document.createElement("i");
        mark.style.left = tick.style.left;
        mark.textContent = local(parseFloat(tick.style.left) / 100 * data.horizon + 1, { hour: "2-digit", minute: "2-digit" });
        ruler.appendChild(mark);
      });
      const name = ruler.closest(".lane").querySelector(".lane-label");
      name.textContent = "UTC, below it " + zoneLabel;
    });
    if (!zone) all(".ruler .lane-label").forEach((label) => { label.textContent = "UTC"; });
    if (chosen >= 0) choose(chosen, false);
  });
  $("zoom").addEventListener("change", () => all(".wide").forEach((wide) => wide.style.setProperty("--zoom", $("zoom").value)));
  $("look").addEventListener("change", () => { document.documentElement.dataset.look = $("look").value; });
  document.querySelector(".tools").addEventListener("submit", (event) => event.preventDefault());
  addEventListener("resize", () => { if (chosen >= 0) draw(); });
  addEventListener("beforeprint", () => { if (chosen >= 0) draw(); });

  // ---- where to begin: the contact in the address, else the one with the most to see ------------------------------
  if (data.contacts.length) {
    const asked = /^#c(\d+)$/.exec(location.hash);
    const best = data.contacts.reduce((top, c, i) => (c.t && c.mb > data.contacts[top].mb ? i : top), 0);
    choose(asked ? Number(asked[1]) : best, false);
  }
})();
