"use strict";
(() => {
  const form = document.getElementById("filter");
  const articles = [...document.querySelectorAll("article[data-row]")];
  const studies = [...document.querySelectorAll(".study")];
  const lines = new Map([...document.querySelectorAll(".forest tr[data-row]")].map(tr => [tr.dataset.row, tr]));
  const bodies = [...document.querySelectorAll(".forest tbody")];
  const said = form.querySelector("output");

  function show() {
    const wanted = {
      study: form.elements.study.value.trim().toLowerCase(),
      status: form.elements.status.value,
      severity: form.elements.severity.value,
      grade: form.elements.grade.value,
    };
    let count = 0;
    for (const article of articles) {
      const data = article.dataset;
      const fits = data.study.includes(wanted.study)
        && (!wanted.status || data.status === wanted.status)
        && (!wanted.severity || data.severity.split(" ").includes(wanted.severity))
        && (!wanted.grade || data.grade === wanted.grade);
      article.hidden = !fits;
      lines.get(data.row).hidden = !fits;
      count += fits;
    }
    for (const study of studies) study.hidden = !study.querySelector("article:not([hidden])");
    for (const body of bodies) body.hidden = !body.querySelector("tr[data-row]:not([hidden])");
    said.value = count + " of " + articles.length + " rows shown";
  }

  form.addEventListener("input", show);
  form.addEventListener("submit", event => event.preventDefault());
  form.addEventListener("reset", () => setTimeout(show));
  form.hidden = false;
  said.value = articles.length + " rows";

  // The lines of a route, put into the boxes of its shape. They stay in the page for those who cannot see a drawing.
  function draw(steps) {
    const drawing = document.getElementById(steps.dataset.shape).content.firstElementChild.cloneNode(true);
    const boxes = drawing.querySelectorAll("text");
    steps.textContent.split("\n").forEach((line, at) => {
      const [value, origin] = line.split("\t");
      const text = boxes[at];
      text.prepend(value);
      if (!text.closest(".leaf")) return;
      for (const piece of origin.match(/\S.{0,33}(?= |$)|\S+/gu)) {
        const below = document.createElementNS(text.namespaceURI, "tspan");
        below.setAttribute("class", "how");
        below.setAttribute("x", text.getAttribute("x"));
        below.setAttribute("dy", "16");
        below.textContent = piece;
        text.append(below);
      }
    });
    steps.before(drawing);
    steps.classList.add("away");
  }

  function drawAll(within) {
    for (const steps of within.querySelectorAll(".steps:not(.away)")) draw(steps);
  }

  document.addEventListener("toggle", event => drawAll(event.target), true);

  let opened = [];
  addEventListener("beforeprint", () => {
    opened = [...document.querySelectorAll("article:not([hidden]) details:not([open])")];
    for (const details of opened) {
      details.open = true;
      drawAll(details);
    }
  });
  addEventListener("afterprint", () => {
    for (const details of opened) details.open = false;
  });
})();
