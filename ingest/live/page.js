// Puts newer sections in the place of older ones as the recorder sends them.
// The markup comes from the recorder's own templates, which escape every text.
"use strict";
(() => {
  const path = document.body.dataset.path;
  const link = document.getElementById("link");
  const waiting = new Map();
  let heard = Date.now();

  // busy: a person is typing or choosing in the section, or has opened a part of it.
  const busy = (section) => {
    const at = document.activeElement;
    return section.contains(at) && at.matches("input, select, textarea, button, summary") ||
      section.querySelector("form details[open], details[open] form") !== null;
  };

  const put = (id, html) => {
    const section = document.getElementById(id);
    if (!section) return;
    if (busy(section)) {
      waiting.set(id, html);
      return;
    }
    waiting.delete(id);
    section.innerHTML = html;
  };

  const tell = () => {
    const seconds = Math.round((Date.now() - heard) / 1000);
    const lost = seconds > 20;
    link.hidden = !lost;
    link.className = lost ? "lost" : "quiet";
    if (lost) link.textContent = "No connection to the recorder for " + seconds + " s: what stands below is old.";
  };

  const source = new EventSource(path + "stream");
  source.addEventListener("sections", (event) => {
    heard = Date.now();
    for (const part of JSON.parse(event.data)) put(part.id, part.html);
    tell();
  });
  setInterval(() => {
    for (const [id, html] of [...waiting]) put(id, html);
    tell();
  }, 1000);
})();
