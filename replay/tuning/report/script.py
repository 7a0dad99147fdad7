"""What runs in the page: draws the charts, fits them to paper, copies the configuration.

Knows the browser and plotly's script. Must not know what the page says.
"""

from __future__ import annotations

SCRIPT = """
"use strict";
(() => {
  const narrow = window.matchMedia("(max-width: 46rem)").matches;
  const plots = [...document.querySelectorAll(".plot")];
  for (const place of plots) {
    try {
      const figure = JSON.parse(document.getElementById(place.id + "-data").textContent);
      // A finger that scrolls the page must not zoom the chart.
      if (!window.matchMedia("(pointer: fine)").matches) figure.layout.dragmode = false;
      if (narrow) figure.layout.margin = {...figure.layout.margin, r: 8};
      Plotly.newPlot(place, figure.data, figure.layout, {displayModeBar: false, responsive: true});
    } catch (error) {
      const told = document.createElement("p");
      told.className = "failed";
      told.textContent = "This chart could not be drawn (" + error.message +
        "). Its figures stand in the tables.";
      place.replaceWith(told);
    }
  }
  // Paper is laid out anew, but no resize is announced for it: the charts are told its width.
  const paper = 680;  // A4 between its margins, in CSS pixels
  const fit = (width) => {
    for (const place of plots) {
      if (!place.isConnected) continue;
      const half = place.closest(".pair") && width ? width / 2 - 12 : width;
      Plotly.relayout(place, {width: half, autosize: !width});
    }
  };
  window.addEventListener("beforeprint", () => fit(paper));
  window.addEventListener("afterprint", () => fit(null));
  for (const button of document.querySelectorAll("button[data-copies]")) {
    button.hidden = false;
    button.addEventListener("click", async () => {
      const text = document.getElementById(button.dataset.copies);
      const whole = document.createRange();
      whole.selectNodeContents(text);
      window.getSelection().removeAllRanges();
      window.getSelection().addRange(whole);
      try {
        await navigator.clipboard.writeText(text.textContent);
        button.textContent = "Copied";
      } catch {  // a page from a file may not reach the clipboard in every browser
        button.textContent = "Selected: press Ctrl+C to copy";
      }
    });
  }
})();
"""
