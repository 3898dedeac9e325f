// One button for each hit: loops before and after in turn, so that the ear compares from one moment to the next.
"use strict";
(() => {
  let playing = null;
  const stop = () => {
    if (!playing) return;
    playing.sounds.forEach((sound) => { sound.pause(); sound.onended = null; });
    playing.button.setAttribute("aria-pressed", "false");
    playing = null;
  };
  document.querySelectorAll("button.switch").forEach((button) => {
    button.addEventListener("click", () => {
      const again = playing && playing.button === button;
      stop();
      if (again) return;
      const sounds = [...button.parentElement.querySelectorAll("audio")];
      playing = { button, sounds };
      button.setAttribute("aria-pressed", "true");
      sounds.forEach((sound, place) => {
        const next = sounds[(place + 1) % sounds.length];
        sound.onended = () => { next.currentTime = 0; next.play(); };
      });
      sounds[0].currentTime = 0;
      sounds[0].play();
    });
  });
})();
