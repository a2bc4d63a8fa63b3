// Renews the page in place: fetches it again and changes what has changed, node by node, so that nothing
// flickers or scrolls, and the keyboard's place, what is selected and what is typed stay as they are.
"use strict";

const EVERY_MS = 2000;
const main = document.getElementById("main");
const hold = document.getElementById("hold");
const contact = document.getElementById("contact");
let held = false;

// Makes `old` like `fresh`; what is alike is left alone.
function follow(old, fresh) {
  if (old.nodeType !== fresh.nodeType || old.nodeName !== fresh.nodeName || old.id !== fresh.id) {
    old.replaceWith(fresh);
    return;
  }
  if (old.nodeType !== Node.ELEMENT_NODE) {
    if (old.nodeValue !== fresh.nodeValue) old.nodeValue = fresh.nodeValue;
    return;
  }
  for (const { name } of [...old.attributes]) {
    // A reader opens and closes these.
    if (!fresh.hasAttribute(name) && !(name === "open" && old.nodeName === "DETAILS")) old.removeAttribute(name);
  }
  for (const { name, value } of fresh.attributes) {
    if (old.getAttribute(name) !== value) old.setAttribute(name, value);
  }
  // Rows are known by their ids, and move with what is in them.
  const known = new Map([...old.children].filter((node) => node.id).map((node) => [node.id, node]));
  let place = old.firstChild;
  for (const node of [...fresh.childNodes]) {
    const match = node.id ? known.get(node.id) : place && !place.id && place;
    if (!match) {
      old.insertBefore(node, place);
      continue;
    }
    if (match === place) place = place.nextSibling;
    else old.insertBefore(match, place);
    follow(match, node);
  }
  while (place) {
    const next = place.nextSibling;
    place.remove();
    place = next;
  }
}

function say(text) {
  if (contact.textContent !== text) contact.textContent = text;
  document.body.classList.toggle("stale", text !== "");
}

async function renew() {
  if (held || document.hidden) return;
  try {
    const answer = await fetch(location.href, { cache: "no-store" });
    if (!answer.ok) throw new Error(answer.statusText);
    const fresh = new DOMParser().parseFromString(await answer.text(), "text/html");
    if (held) return;
    const focused = document.activeElement;
    follow(main, document.adoptNode(fresh.getElementById("main")));
    // A row that was moved has lost the keyboard on the way.
    if (focused !== document.activeElement && focused.isConnected) focused.focus({ preventScroll: true });
    document.title = fresh.title;
    say("");
  } catch {
    say("No contact with the daemon: what stands here is old.");
  }
}

// Where a picture of time is wider than the screen, it opens at its end, where now is.
for (const { firstElementChild: picture } of document.querySelectorAll(".ends-now")) {
  picture.scrollLeft = picture.scrollWidth;
}

hold.hidden = false;
hold.addEventListener("click", () => {
  held = !held;
  hold.setAttribute("aria-pressed", String(held));
});
setInterval(renew, EVERY_MS);
document.addEventListener("visibilitychange", renew);
