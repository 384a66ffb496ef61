// Short tones, made here. Browsers allow sound only after somebody touched the page.

let audio = null;
let on = localStorage.getItem("sound") !== "off";

export function setUpSound(button) {
  const name = () => { button.textContent = on ? "Sound on" : "Sound off"; button.setAttribute("aria-pressed", String(on)); };
  button.addEventListener("click", () => {
    on = !on;
    localStorage.setItem("sound", on ? "on" : "off");
    name();
    if (on) tones([[660, 0, 0.1]]);
  });
  const wake = () => { audio ??= new AudioContext(); audio.resume(); };
  addEventListener("pointerdown", wake);
  addEventListener("keydown", wake);
  name();
}

/** tones plays [frequency in Hz, start in s, length in s]. */
function tones(list) {
  if (!on || !audio || audio.state !== "running") return;
  for (const [hertz, start, length] of list) {
    const tone = audio.createOscillator();
    const level = audio.createGain();
    const begin = audio.currentTime + start;
    tone.frequency.value = hertz;
    level.gain.setValueAtTime(0, begin);
    level.gain.linearRampToValueAtTime(0.22, begin + 0.012);
    level.gain.exponentialRampToValueAtTime(0.001, begin + length);
    tone.connect(level).connect(audio.destination);
    tone.start(begin);
    tone.stop(begin + length);
  }
}

export const taken = () => tones([[587, 0, 0.16], [880, 0.11, 0.3]]); // rising: the weight is taken
export const seen = () => tones([[392, 0, 0.14]]);                    // one low tone: seen, not taken
export const doubt = () => tones([[523, 0, 0.2], [392, 0.18, 0.2], [523, 0.36, 0.3]]);
