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
  show();

  let opened = [];
  addEventListener("beforeprint", () => {
    opened = [...document.querySelectorAll("details:not([open])")];
    for (const details of opened) details.open = true;
  });
  addEventListener("afterprint", () => {
    for (const details of opened) details.open = false;
  });
})();
