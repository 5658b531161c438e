  function chart(c, width, height, title, values, options) {
    const box = { top: 18, bottom: height - (options.times ? 20 : 6), left: 30, right: width - 6 };
    const svg = make("svg", { viewBox: `0 0 ${width} ${height}`, class: "chart" });
    const first = c.t[0], last = c.t[c.t.length - 1];
    const x = (t) => box.left + (box.right - box.left) * (t - first) / (last - first || 1);
    const sent = options.steps ? c.sent.map((piece) => piece[2] || 0) : [];
    const low = Math.min(0, ...values), high = Math.max(options.least || 0, ...values, ...sent) * 1.06 || 1;
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
      make("path", { d: values.map((v, i) => (i ? "L" : "M") + x(options.at[i]).toFixed(1) + " " + y(v).toFixed(1)).join(""), class: "curve" }, svg);
      make("path", { d: `M${box.left} ${y(data.required)}H${box.right}`, class: "asked" }, svg);
      make("text", { x: box.right, y: y(data.required) + 12, "text-anchor": "end", class: "note" }, svg, `asked ${data.required} dB`);
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
