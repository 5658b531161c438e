  // ---- the contact -------------------------------------------------------------------------------------------
  const hint = $("readout").textContent;
  let drawings = [], reading = 0, pointed = false;
  function read(t) {
    const c = data.contacts[chosen];
    reading = Math.min(Math.max(t, c.t[0]), c.t[c.t.length - 1]);
    pointed = true;
    drawings.forEach((one) => one.show(reading));
    const k = c.t.findLastIndex((time) => time <= reading + 0.01), margin = at(c.dt || c.t, c.db, reading);
    $("readout").textContent = `${utc(reading)} UTC · azimuth ${pointing(c, reading)[0].toFixed(1)}° · elevation ${pointing(c, reading)[1].toFixed(1)}° · ` +
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
    if (c.db.length) drawings.push(chart(c, width, phone ? 96 : 118, c.dt ? "Margin, dB, of the modcod in force" : `Margin, dB, ${c.modcod || "command"}`, c.db, { least: data.required, times: !sends, at: c.dt || c.t }));
    if (sends) drawings.push(chart(c, width, phone ? 110 : 130, "Rate, Mbit/s: allowed, and used", c.rate, { steps: true, times: true }));
    drawings.forEach((one) => {
      room.appendChild(one.svg);
      if (one.time) one.svg.addEventListener("pointermove", (event) => {
        const frame = one.svg.getBoundingClientRect();
        read(one.time((event.clientX - frame.left) * width / frame.width));
      });
    });
    if (pointed) read(reading); else reading = (c.from + c.to) / 2;
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
    if (i !== chosen) { pointed = false; $("readout").textContent = hint; }
    chosen = i;
    $("contact").hidden = false;
    all(".chosen").forEach((node) => node.classList.remove("chosen"));
    all(`[data-c="${i}"]`).forEach((node) => node.classList.add("chosen"));
    $("contact-title").textContent = `\u2068${data.spacecraft[c.s]}\u2069 on \u2068${antenna.name}\u2069, ${day(c.from)} ${utc(c.from)} to ${utc(c.to)} UTC`;
    const list = $("contact-facts");
    list.textContent = "";
    $("contact-id").textContent = c.id;
    fact(list, "Site", data.sites[antenna.site].name);
    if (zone) {
      const clock = { hour: "2-digit", minute: "2-digit", second: "2-digit" };
      fact(list, "Local", `${local(c.from, clock)} to ${local(c.to, clock)}, ${zoneLabel}`);
    }
    fact(list, "Lasts", ((c.to - c.from) / 60).toFixed(1) + " min");
    fact(list, "Service", c.service === "both" ? "downlink and command" : c.service);
    fact(list, "Radio", `${c.radio}, ${c.mhz} MHz ${c.polarisation}`);
    fact(list, "Modcod", c.modcod);
    const rates = [...new Set(c.sent.map((p) => p[2]).filter((r) => r))].sort((a, b) => a - b);
    fact(list, "Rate", rates.length > 1 ? `${rates.length} steps, ${rateWords(rates[0])} to ${rateWords(rates.at(-1))}` : rates.map(rateWords).join());
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
