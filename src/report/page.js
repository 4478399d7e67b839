// The picture: scrub through the frames; hide what had not arrived by then.
(() => {
  "use strict";
  const film = document.getElementById("film");
  if (!film) return;
  const shots = JSON.parse(film.textContent);
  const byId = (id) => document.getElementById(id);
  const [shot, scrub, play, readout, axis] = ["shot", "scrub", "play", "readout", "axis"].map(byId);
  const [mark, turn] = ["load-mark", "load-turn"].map(byId);
  const stretches = [...document.querySelectorAll("#traces [data-shot]")];
  const last = shot.getAttribute("href");
  /** Milliseconds a frame stands while playing. */
  const PACE = 220;
  let timer = 0;

  function show(index) {
    const now = shots[index];
    shot.setAttribute("href", now.src || last);
    for (const s of stretches) s.style.display = Number(s.dataset.shot) <= index ? "" : "none";
    const words = ["frame " + now.frame, now.time, now.said].filter(Boolean).join(" · ");
    readout.textContent = words;
    scrub.value = String(index);
    scrub.setAttribute("aria-valuetext", words);
    if (mark) aim(now);
    if (axis && now.axis !== null) axis.style.transform = "rotate(" + -now.axis + "deg)";
  }

  /** Lays the mark on the picture along the load axis of the frame: arrows inwards where it presses. */
  function aim(now) {
    mark.style.display = now.axis === null ? "none" : "";
    if (now.axis === null) return;
    turn.setAttribute("transform", "rotate(" + -now.axis + ")");
    for (const p of mark.querySelectorAll(".press")) p.style.display = now.push > 0 ? "" : "none";
    for (const p of mark.querySelectorAll(".pull")) p.style.display = now.push < 0 ? "" : "none";
  }

  function stop() {
    clearInterval(timer);
    timer = 0;
    play.textContent = "Play";
    play.setAttribute("aria-label", "Play");
  }

  play.addEventListener("click", () => {
    if (timer) return stop();
    if (Number(scrub.value) === shots.length - 1) show(0);
    play.textContent = "Pause";
    play.setAttribute("aria-label", "Pause");
    timer = setInterval(() => {
      const next = Number(scrub.value) + 1;
      if (next < shots.length) show(next);
      if (next >= shots.length - 1) stop();
    }, PACE);
  });
  scrub.addEventListener("input", () => { stop(); show(Number(scrub.value)); });
  byId("show-traces").addEventListener("change", (event) => {
    byId("traces").style.display = event.target.checked ? "" : "none";
  });

  if (shots.length > 1) document.querySelector(".reels").hidden = false;
  show(shots.length - 1);
})();
