// Renews the page in place: fetches it again and puts the new status where the old one was, so that
// nothing flickers, nothing scrolls and the keyboard's place in the page is kept.
"use strict";

const EVERY_MS = 2000;
const hold = document.getElementById("pause");
let held = false;

async function renew() {
  if (held || document.hidden) return;
  try {
    const answer = await fetch("/", { cache: "no-store" });
    if (!answer.ok) throw new Error(answer.statusText);
    const fresh = new DOMParser().parseFromString(await answer.text(), "text/html");
    document.getElementById("status").replaceChildren(...fresh.getElementById("status").childNodes);
    document.title = fresh.title;
    document.body.classList.remove("stale");
  } catch {
    document.body.classList.add("stale");
    document.title = "ratewright: no contact";
  }
}

hold.hidden = false;
hold.addEventListener("click", () => {
  held = !held;
  hold.setAttribute("aria-pressed", String(held));
});
setInterval(renew, EVERY_MS);
document.addEventListener("visibilitychange", renew);
