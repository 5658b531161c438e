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
