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
      const axis = ruler.parentElement.dataset;
      all("i", ruler.parentElement).forEach((tick, k, list) => {
        if (list.length > 13 && k % 2) return;
        const mark = document.createElement("i");
        mark.style.left = tick.style.left;
        mark.textContent = local(Number(axis.first) + parseFloat(tick.style.left) / 100 * axis.length + 1, { hour: "2-digit", minute: "2-digit" });
        ruler.appendChild(mark);
      });
      const name = ruler.closest(".lane").querySelector(".lane-label");
      name.dataset.plain = name.dataset.plain || name.textContent;
      name.textContent = name.dataset.plain + ", below it " + zoneLabel;
    });
    if (!zone) all(".ruler .lane-label[data-plain]").forEach((label) => { label.textContent = label.dataset.plain; });
    if (chosen >= 0) choose(chosen, false);
  });
  $("zoom").addEventListener("change", () => all(".wide").forEach((wide) => wide.style.setProperty("--zoom", $("zoom").value)));
  $("look").addEventListener("change", () => { document.documentElement.dataset.look = $("look").value; });
  document.querySelector(".tools").addEventListener("submit", (event) => event.preventDefault());
  addEventListener("resize", () => { if (chosen >= 0) draw(); });
  addEventListener("beforeprint", () => { if (chosen >= 0) draw(); });
