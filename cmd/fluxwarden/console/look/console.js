// Live rows, a read-out under the pointer, zoom by drawing a stretch. Pages work without it.
"use strict";
(function () {
  const $ = (s) => document.querySelector(s);
  const link = $("#link");

  // Rows of the network page, as they change; a day page that shows today is fetched again when its station has new minutes.
  const table = $("#network"), figures = $("#figures");
  if (table || figures) {
    const source = new EventSource("/live");
    let waiting = 0;
    source.onopen = () => { link.textContent = "live"; };
    source.onerror = () => { link.textContent = "not live"; };
    source.addEventListener("station", (e) => {
      const news = JSON.parse(e.data);
      if (table) {
        const row = document.getElementById("s-" + news.id);
        if (row) row.outerHTML = news.html;
      } else if (news.id === figures.dataset.station && news.last.startsWith(figures.dataset.day) && !location.search && !waiting) {
        waiting = setTimeout(() => { waiting = 0; refresh(); }, 5000);
      }
    });
  }

  async function refresh() {
    const answer = await fetch(location.href);
    if (!answer.ok) return;
    const page = new DOMParser().parseFromString(await answer.text(), "text/html");
    const open = figures.querySelector("details").open;
    figures.innerHTML = page.querySelector("#figures").innerHTML;
    figures.querySelector("details").open = open;
    day = null;
  }

  // The minutes of the day, fetched when the pointer first asks for one.
  let day = null, asked = false;
  async function minutes() {
    if (!day && !asked) {
      asked = true;
      const answer = await fetch(figures.dataset.api);
      if (answer.ok) day = await answer.json();
      asked = false;
    }
    return day;
  }

  const out = $("#readout");
  function minuteUnder(svg, e) {
    const box = svg.getBoundingClientRect(), d = svg.dataset;
    const x = (e.clientX - box.left) / box.width * 1000;
    const share = (x - d.left) / (d.right - d.left);
    return share < 0 || share > 1 ? null : Math.floor(+d.x0 + share * (d.x1 - d.x0));
  }
  function xOf(svg, m) {
    const d = svg.dataset;
    return +d.left + (m - d.x0) / (d.x1 - d.x0) * (d.right - d.left);
  }
  function line(svg, cls, attrs, name) {
    let mark = svg.querySelector("." + cls);
    if (!mark) {
      mark = document.createElementNS("http://www.w3.org/2000/svg", name);
      mark.setAttribute("class", cls);
      svg.append(mark);
    }
    for (const k in attrs) mark.setAttribute(k, attrs[k]);
  }

  async function read(svg, m) {
    for (const other of figures.querySelectorAll("svg[data-x0]")) {
      const x = xOf(other, m + 0.5).toFixed(1);
      line(other, "cursor", { x1: x, x2: x, y1: 12, y2: other.viewBox.baseVal.height - 24 }, "line");
    }
    const data = await minutes();
    if (!data) return;
    const i = m - data.from;
    const text = [new Date(m * 60000).toISOString().slice(0, 16).replace("T", " ") + "Z"];
    for (const c of data.columns) {
      const v = c.values[i];
      let part = c.name.replaceAll("_", " ") + " " + (v === null ? "–" : v.toFixed(1) + " " + c.unit);
      if (c.verdicts && c.verdicts[i] && c.verdicts[i] !== "accepted") part += " " + c.verdicts[i] + (c.reasons && c.reasons[i] ? " (" + c.reasons[i] + ")" : "");
      text.push(part);
    }
    out.hidden = false;
    out.textContent = text.join("   ");
  }

  if (figures && out) {
    let from = null, on = null;
    const clock = (m) => new Date(m * 60000).toISOString().slice(11, 16);
    figures.addEventListener("pointermove", (e) => {
      const svg = e.target.closest("svg[data-x0]");
      if (!svg) return;
      const m = minuteUnder(svg, e);
      if (m === null) return;
      read(svg, m);
      if (from !== null && on === svg) {
        const a = xOf(svg, Math.min(from, m)), b = xOf(svg, Math.max(from, m));
        line(svg, "drawn", { x: a, width: b - a, y: 12, height: svg.viewBox.baseVal.height - 36 }, "rect");
      }
    });
    figures.addEventListener("pointerdown", (e) => {
      const svg = e.target.closest("svg[data-x0]");
      if (svg && e.button === 0 && e.pointerType === "mouse") { from = minuteUnder(svg, e); on = svg; e.preventDefault(); }
    });
    document.addEventListener("pointerup", (e) => {
      if (from === null) return;
      const m = on ? minuteUnder(on, e) : null, a = from;
      from = null;
      on.querySelector(".drawn")?.remove();
      if (m !== null && Math.abs(m - a) >= 5) location.search = "?from=" + clock(Math.min(a, m)) + "&to=" + (Math.max(a, m) % 1440 === 0 ? "24:00" : clock(Math.max(a, m)));
    });
    // By keyboard: arrows move the read-out by a minute, with shift by an hour.
    let at = null;
    document.addEventListener("keydown", (e) => {
      if (e.key !== "ArrowLeft" && e.key !== "ArrowRight" || e.target.closest("input")) return;
      const svg = figures.querySelector("svg[data-x0]");
      if (!svg) return;
      const low = +svg.dataset.x0, high = +svg.dataset.x1 - 1;
      at = (at ?? Math.floor((low + high) / 2)) + (e.key === "ArrowLeft" ? -1 : 1) * (e.shiftKey ? 60 : 1);
      at = Math.min(Math.max(at, low), high);
      read(svg, at);
    });
  }
})();
