"use strict";
(() => {
  // A number with an SI prefix and so many significant digits.
  const prefixes = ["a", "f", "p", "n", "µ", "m", "", "k", "M", "G", "T"];
  const si = (v, unit, digits) => {
    if (!Number.isFinite(v)) return "";
    if (v === 0) return "0 " + unit;
    let exponent = Number(Math.abs(v).toExponential(digits - 1).split("e")[1]);
    let step = Math.max(-6, Math.min(4, Math.floor(exponent / 3)));
    let scaled = v / 10 ** (3 * step);
    let decimals = Math.max(0, digits - 1 - (exponent - 3 * step));
    return scaled.toFixed(decimals) + " " + prefixes[step + 6] + unit;
  };
  const signed = (v, digits, unit) => (v > 0 ? "+" : "") + v.toPrecision(digits) + unit;

  const follow = part => {
    const d = JSON.parse(part.querySelector("script.data").textContent);
    const n = d.f.length, first = Math.log(d.f[0]), last = Math.log(d.f[n - 1]);
    const readout = part.querySelector(".readout"), slider = readout.querySelector("input");
    const caption = readout.querySelector("caption"), cells = readout.querySelectorAll("td");
    const plots = [...part.querySelectorAll(".plot")].map(element => {
      const [left, right, top, bottom] = element.dataset.area.split(" ").map(Number);
      return { element, left, right, top, bottom, cursor: null };
    });
    slider.max = n - 1;

    const show = i => {
      slider.value = i;
      caption.textContent = si(d.f[i], "Hz", 4);
      let turn = d.mp[i] - d.p[i];
      turn -= 360 * Math.round(turn / 360);
      const text = [
        si(d.z[i], "Ω", 4), d.p[i].toFixed(2) + "°",
        si(d.mz[i], "Ω", 4), d.mp[i].toFixed(2) + "°",
        signed(100 * Math.log(d.mz[i] / d.z[i]), 2, " %"), signed(turn, 2, "°"),
      ];
      text.forEach((t, k) => { cells[k].textContent = t; });
      slider.setAttribute("aria-valuetext", si(d.f[i], "Hz", 4) + ", measured " + text[0] + " " + text[1] + ", fitted less measured " + text[4] + " " + text[5]);
      const u = last > first ? (Math.log(d.f[i]) - first) / (last - first) : 0.5;
      for (const p of plots) {
        if (!p.cursor) {
          p.cursor = document.createElement("div");
          p.cursor.className = "cursor";
          p.element.append(p.cursor);
        }
        p.cursor.style.left = 100 * (p.left + u * (p.right - p.left)) + "%";
        p.cursor.style.top = 100 * p.top + "%";
        p.cursor.style.height = 100 * (p.bottom - p.top) + "%";
      }
    };
    const nearest = x => {
      let low = 0, high = n - 1;
      while (high - low > 1) {
        const middle = (low + high) >> 1;
        if (Math.log(d.f[middle]) <= x) low = middle; else high = middle;
      }
      return x - Math.log(d.f[low]) < Math.log(d.f[high]) - x ? low : high;
    };
    for (const p of plots) {
      const point = event => {
        const box = p.element.getBoundingClientRect();
        const u = ((event.clientX - box.left) / box.width - p.left) / (p.right - p.left);
        show(nearest(first + Math.min(1, Math.max(0, u)) * (last - first)));
      };
      p.element.addEventListener("pointermove", point);
      p.element.addEventListener("pointerdown", point);
    }
    slider.addEventListener("input", () => show(Number(slider.value)));
    // Begin where |Z| is least or largest inside the sweep, else in the middle.
    let begin = n >> 1;
    for (let i = 1; i < n - 1; i++) {
      if ((d.mz[i] - d.mz[i - 1]) * (d.mz[i + 1] - d.mz[i]) < 0) { begin = i; break; }
    }
    show(begin);
  };
  // A lot has hundreds of parts: each is set up when it comes near the window.
  const near = new IntersectionObserver(entries => {
    for (const entry of entries) {
      if (!entry.isIntersecting) continue;
      near.unobserve(entry.target);
      follow(entry.target.closest(".part"));
    }
  }, { rootMargin: "600px" });
  for (const figures of document.querySelectorAll("section.part .figures")) {
    figures.querySelector(".readout").hidden = false;
    near.observe(figures);
  }

  const index = document.querySelector(".index");
  if (!index) return;
  const body = index.querySelector("tbody"), rows = [...body.rows];
  const key = (row, column) => {
    const cell = row.cells[column];
    return "sort" in cell.dataset ? (cell.dataset.sort === "" ? null : Number(cell.dataset.sort)) : cell.textContent;
  };
  const compare = (a, b) => typeof a === "number" ? a - b : a.localeCompare(b, "en", { numeric: true });
  [...index.querySelectorAll("thead th")].forEach((head, column, heads) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = head.textContent;
    head.replaceChildren(button);
    button.addEventListener("click", () => {
      const down = head.getAttribute("aria-sort") === "ascending";
      heads.forEach(h => h.removeAttribute("aria-sort"));
      head.setAttribute("aria-sort", down ? "descending" : "ascending");
      rows.sort((r, s) => {
        const a = key(r, column), b = key(s, column);
        if (a === null || b === null) return (a === null) - (b === null); // unknown last, both ways
        return down ? compare(b, a) : compare(a, b);
      });
      body.append(...rows);
    });
  });
  const filter = index.querySelector(".filter"), input = filter.querySelector("input"), count = filter.querySelector("output");
  const apply = () => {
    const words = input.value.toLowerCase().split(/\s+/).filter(Boolean);
    let shown = 0;
    for (const row of rows) {
      const text = row.textContent.toLowerCase();
      row.hidden = !words.every(w => text.includes(w));
      if (!row.hidden) shown++;
    }
    count.textContent = shown + " of " + rows.length + " parts";
  };
  input.addEventListener("input", apply);
  filter.hidden = false;
  apply();
})();
