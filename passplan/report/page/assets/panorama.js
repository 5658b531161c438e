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
  // Between samples along the great circle: near the zenith azimuths swing far, directions do not.
  function pointing(c, t) {
    let i = 1;
    while (i < c.t.length - 1 && c.t[i] < t) i++;
    if (c.t.length < 2) return [c.az[0], c.el[0]];
    const part = Math.min(Math.max((t - c.t[i - 1]) / (c.t[i] - c.t[i - 1] || 1), 0), 1);
    const [a, b] = [i - 1, i].map((k) => {
      const az = c.az[k] * Math.PI / 180, el = c.el[k] * Math.PI / 180;
      return [Math.cos(el) * Math.sin(az), Math.cos(el) * Math.cos(az), Math.sin(el)];
    });
    const [east, north, up] = a.map((value, k) => value + part * (b[k] - value));
    return [((Math.atan2(east, north) * 180 / Math.PI) + 360) % 360, Math.atan2(up, Math.hypot(east, north)) * 180 / Math.PI];
  }
  const azimuthAt = (c, t) => pointing(c, t)[0];
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
      const i = Math.min(Math.max(Math.floor((t - site.first) / site.step), 0), site.sun.length / 2 - 2);
      const part = (t - site.first) / site.step - i;
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
      return times.flatMap((t, i) => i ? [1, 2, 3, 4, 5, 6, 7, 8].map((p) => times[i - 1] + p / 8 * (t - times[i - 1])) : [t])
        .map((t) => pointing(c, t));
    };
    const first = c.t[0], last = c.t[c.t.length - 1];
    line(inside(first, last), "path-all");
    line(inside(Math.max(c.from, first), Math.min(c.to, last)), "path-contact");
    for (const [a, b] of c.keyholes || []) line(inside(a, b), "path-keyhole");
    const narrow = span < 480;
    const ends = [[Math.max(c.from, first), "from "], [Math.min(c.to, last), "to "]]
      .map(([t, word]) => ({ px: x(azimuthAt(c, t)), py: y(pointing(c, t)[1]), text: word + utc(t, !narrow) }))
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
    return { svg, show: (t) => { cursor.setAttribute("visibility", "visible"); cursor.setAttribute("cx", x(azimuthAt(c, t))); cursor.setAttribute("cy", y(pointing(c, t)[1])); } };
  }
