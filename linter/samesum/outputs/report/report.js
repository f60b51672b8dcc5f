"use strict";
(() => {
  const all = (selector, within = document) => Array.from(within.querySelectorAll(selector));
  const one = (selector, within = document) => within.querySelector(selector);

  // --- the panel: what stands in "Each place" about one branch point, beside the map or the table ---
  const panel = one("[data-panel]");
  let from = null;
  const close = () => {
    if (panel.hidden) return;
    panel.hidden = true;
    document.body.classList.remove("with-panel");
    all(".entry.chosen").forEach((each) => each.classList.remove("chosen"));
    if (from && from.isConnected) from.focus({ preventScroll: true });
    from = null;
  };
  const open = (number, link) => {
    const article = document.getElementById(`place-${number}`);
    if (!article) return;
    const copy = article.cloneNode(true);
    copy.removeAttribute("id");
    const button = document.createElement("button");
    button.type = "button";
    button.className = "close";
    button.textContent = "Close";
    button.addEventListener("click", close);
    panel.replaceChildren(button, copy);
    panel.hidden = false;
    panel.scrollTop = 0;
    document.body.classList.add("with-panel");
    all(".entry").forEach((each) => each.classList.toggle("chosen", each.dataset.place === String(number)));
    from = link;
    panel.focus({ preventScroll: true });
    link.scrollIntoView({ block: "nearest", inline: "nearest" });
  };
  document.addEventListener("click", (event) => {
    const link = event.target.closest("a[data-place]");
    if (!link || event.ctrlKey || event.metaKey || event.shiftKey) return;
    event.preventDefault();
    open(link.dataset.place, link);
  });
  document.addEventListener("keydown", (event) => { if (event.key === "Escape") close(); });

  // --- the map: one chart at a time, any size, moved by dragging or scrolling ---
  const canvases = all(".canvas");
  const pick = one("[data-pick]");
  const sizes = new Map();
  const chart = (canvas) => one("svg.chart", canvas);
  const resize = (canvas, size) => {
    const svg = chart(canvas);
    const before = sizes.get(canvas) || 1;
    const middle = [canvas.scrollLeft + canvas.clientWidth / 2, canvas.scrollTop + canvas.clientHeight / 2];
    const scale = Math.min(Math.max(size, 0.2), 2.5);
    sizes.set(canvas, scale);
    svg.setAttribute("width", Math.round(svg.dataset.width * scale));
    svg.setAttribute("height", Math.round(svg.dataset.height * scale));
    canvas.scrollLeft = middle[0] * scale / before - canvas.clientWidth / 2;
    canvas.scrollTop = middle[1] * scale / before - canvas.clientHeight / 2;
  };
  const room = () => Math.min(0.78 * window.innerHeight, 860) - 44; // the canvas's own limit, less its title
  const fitting = (canvas) => Math.min((canvas.clientWidth - 2) / chart(canvas).dataset.width, room() / chart(canvas).dataset.height);
  const shown = () => canvases.find((canvas) => !canvas.hidden);
  const show = (id) => {
    canvases.forEach((canvas) => { canvas.hidden = canvas.id !== id; });
    if (pick) pick.value = id;
    const canvas = shown();
    if (canvas && !sizes.has(canvas)) {
      resize(canvas, Math.min(1, Math.max(fitting(canvas), 0.72)));
      canvas.scrollLeft = 0;
      canvas.scrollTop = 0;
    }
  };
  if (canvases.length) {
    show(canvases[0].id);
    if (pick) pick.addEventListener("change", () => show(pick.value));
    document.addEventListener("click", (event) => {
      const link = event.target.closest("[data-open]");
      if (!link) return;
      event.preventDefault();
      show(link.dataset.open);
      shown().focus({ preventScroll: true });
    });
    all("[data-zoom]").forEach((button) => button.addEventListener("click", () => {
      const canvas = shown();
      const size = sizes.get(canvas) || 1;
      resize(canvas, { in: size * 1.25, out: size / 1.25, fit: Math.min(1, fitting(canvas)) }[button.dataset.zoom]);
    }));
    canvases.forEach((canvas) => {
      canvas.addEventListener("wheel", (event) => {
        if (!event.ctrlKey && !event.metaKey) return;
        event.preventDefault();
        resize(canvas, (sizes.get(canvas) || 1) * Math.exp(-event.deltaY / 300));
      }, { passive: false });
      let start = null;
      let moved = false;
      canvas.addEventListener("pointerdown", (event) => {
        if (event.pointerType !== "mouse" || event.button !== 0) return;
        start = [event.clientX + canvas.scrollLeft, event.clientY + canvas.scrollTop];
        moved = false;
      });
      window.addEventListener("pointermove", (event) => {
        if (!start) return;
        const left = start[0] - event.clientX;
        const top = start[1] - event.clientY;
        if (!moved && Math.hypot(left - canvas.scrollLeft, top - canvas.scrollTop) < 5) return;
        moved = true;
        canvas.classList.add("dragging");
        canvas.scrollLeft = left;
        canvas.scrollTop = top;
      });
      window.addEventListener("pointerup", () => { start = null; canvas.classList.remove("dragging"); });
      canvas.addEventListener("click", (event) => {
        if (!moved) return;
        event.preventDefault();
        event.stopPropagation();
        moved = false;
      }, true);
      canvas.addEventListener("dragstart", (event) => event.preventDefault());
    });
  }

  // --- the table: filtered and sorted ---
  const table = one("[data-table]");
  const rows = all("tbody tr", table);
  const heads = all("thead th", table);
  const body = one("tbody", table);
  const search = one("[data-search]");
  const choices = { kind: one("[data-kind]", one("[data-filters]")), who: one("[data-who]", one("[data-filters]")), decision: one("[data-decision]", one("[data-filters]")) };
  const leaving = one("[data-leaving]");
  const count = one("[data-shown]");
  const wordings = rows.map((row) => {
    const article = document.getElementById(`place-${one("[data-place]", row).dataset.place}`);
    return `${row.textContent} ${article ? article.textContent : ""}`.toLocaleLowerCase();
  });
  const filter = () => {
    const words = search.value.toLocaleLowerCase().split(/\s+/).filter(Boolean);
    let kept = 0;
    rows.forEach((row, number) => {
      const fits = words.every((word) => wordings[number].includes(word))
        && (!choices.kind.value || row.dataset.kind === choices.kind.value)
        && (!choices.who.value || row.dataset.who.includes(choices.who.value))
        && (!choices.decision || !choices.decision.value || row.dataset.decision === choices.decision.value)
        && (!leaving.checked || row.dataset.leaves === "yes");
      row.hidden = !fits;
      if (fits) kept += 1;
    });
    count.textContent = `${kept.toLocaleString("en")} of ${rows.length.toLocaleString("en")} shown`;
  };
  const byText = new Intl.Collator("en", { numeric: true, sensitivity: "base" }).compare;
  const sort = (column, falling) => {
    const way = heads[column].dataset.sort;
    const value = (row) => row.children[column].dataset.value;
    const ordered = rows.slice().sort((a, b) => {
      const [x, y] = [value(a), value(b)];
      if (x === "" || y === "") return x === y ? rows.indexOf(a) - rows.indexOf(b) : x === "" ? 1 : -1;
      const found = way === "number" ? Number(x) - Number(y) : byText(x, y);
      return (falling ? -found : found) || rows.indexOf(a) - rows.indexOf(b);
    });
    body.append(...ordered);
    heads.forEach((head, place) => {
      if (place === column) head.setAttribute("aria-sort", falling ? "descending" : "ascending");
      else head.removeAttribute("aria-sort");
    });
  };
  const sorter = one("[data-sorter]");
  heads.forEach((head, column) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = head.textContent;
    head.replaceChildren(button);
    button.addEventListener("click", () => {
      const now = head.getAttribute("aria-sort");
      sort(column, now ? now === "ascending" : head.dataset.sort === "number");
    });
    if (column) sorter.add(new Option(button.textContent.toLocaleLowerCase(), String(column)));
  });
  sorter.addEventListener("change", () => {
    const column = Number(sorter.value);
    sort(column, heads[column].dataset.sort === "number");
  });
  [search, leaving, ...Object.values(choices)].filter(Boolean).forEach((each) => {
    each.addEventListener("input", filter);
    each.addEventListener("change", filter);
  });
  one("[data-filters]").addEventListener("submit", (event) => event.preventDefault());
  filter();
})();
