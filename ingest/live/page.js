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
    const since = seconds < 120 ? seconds + " s" : Math.round(seconds / 60) + " min";
    if (lost) link.textContent = "ABNORMAL: No connection to the recorder for " + since + ": what stands below is old.";
  };

  let source;
  const listen = () => {
    source = new EventSource(path + "stream");
    source.addEventListener("sections", (event) => {
      heard = Date.now();
      for (const part of JSON.parse(event.data)) put(part.id, part.html);
      tell();
    });
  };
  listen();
  setInterval(() => {
    for (const [id, html] of [...waiting]) put(id, html);
    tell();
    // A browser gives up for good where the answer was a refusal, as while too
    // many people are looking.
    if (source.readyState === EventSource.CLOSED && Math.round(Date.now() / 1000) % 5 === 0) listen();
  }, 1000);
})();
