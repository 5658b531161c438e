  // ---- filters -----------------------------------------------------------------------------------------------
  const wanted = (id) => $(id).value === "" ? null : Number($(id).value);
  function fits(s, a, want) {
    return (want.s === null || s === want.s) && (want.a === null || a === want.a) && (want.g === null || (a >= 0 && data.antennas[a].site === want.g));
  }
  // The seconds that the chosen day covers, or all of them; there is a day to choose only in plans of several.
  function within() {
    const chosen = $("f-d") && wanted("f-d");
    return typeof chosen === "number" ? [chosen * 86400, (chosen + 1) * 86400] : [-Infinity, Infinity];
  }
  function filter() {
    const want = { s: wanted("f-s"), a: wanted("f-a"), g: wanted("f-g") }, [from, to] = within();
    let count = 0;
    data.contacts.forEach((c, i) => {
      const fit = fits(c.s, c.a, want) && c.from < to && c.to > from;
      $("c" + i).hidden = !fit;
      count += fit;
    });
    all(".mark").forEach((mark) => { const c = data.contacts[mark.dataset.c]; mark.classList.toggle("off", !fits(c.s, c.a, want)); });
    all(".lane[data-a]").forEach((lane) => { const a = Number(lane.dataset.a); lane.hidden = !fits(want.s, a, want); });
    all(".lane[data-s]").forEach((lane) => { lane.hidden = want.s !== null && Number(lane.dataset.s) !== want.s; });
    all(".lane[data-a] path[data-s]").forEach((path) => path.classList.toggle("off", want.s !== null && Number(path.dataset.s) !== want.s));
    all(".lane[data-s] path[data-a]").forEach((path) => path.classList.toggle("off", !fits(want.s, Number(path.dataset.a), want)));
    all("[data-band]").forEach((band) => { band.hidden = from >= 0 && Number(band.dataset.band) !== from / 86400; });
    all(".bars tr[data-a]").forEach((row) => { row.hidden = !fits(want.s, Number(row.dataset.a), want); });
    all("tr.gone").forEach((row) => { row.hidden = !fits(Number(row.dataset.s), Number(row.dataset.a), want); });
    $("count").textContent = count + (count === 1 ? " contact" : " contacts");
    listUnused(true);
  }
  ["f-s", "f-a", "f-g", "f-d"].filter($).forEach((id) => $(id).addEventListener("change", filter));

  // ---- unused windows: many, so rows appear by the hundred ------------------------------------------------------
  function listUnused(afresh) {
    if (!$("unused").open) return;
    const want = { s: wanted("f-s"), a: wanted("f-a"), g: wanted("f-g") }, reason = $("f-r").value, [from, to] = within();
    const rows = data.unused.filter((u) => fits(u[0], u[1], want) && u[2] < to && u[3] > from && (!reason || u[4] === reason));
    if (afresh) { $("unused-rows").textContent = ""; shown = 0; }
    for (const u of rows.slice(shown, shown + 200)) {
      const row = document.createElement("tr");
      for (const text of [day(u[2]) + " " + utc(u[2]), utc(u[3]), data.antennas[u[1]].name, data.spacecraft[u[0]], data.reasons[u[4]] + ": " + u[5]]) {
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
