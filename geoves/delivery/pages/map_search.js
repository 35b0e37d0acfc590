// A search for a permit, sounding, well or coordinates.

const kinds = [["permit", described.permits], ["sounding", described.soundings], ["well", described.wells]];

// Places whose name holds the words; exact names first.
function findPlaces(wanted) {
  const low = wanted.trim().toLowerCase();
  if (!low) return [];
  const hits = kinds.flatMap(([kind, places]) => places.map((place) => ({ kind, place })))
    .filter(({ place }) => place.name.toLowerCase().includes(low));
  const rank = ({ place }) => place.name.toLowerCase() === low ? 0 : place.name.toLowerCase().startsWith(low) ? 1 : 2;
  return hits.sort((one, other) => rank(one) - rank(other)).slice(0, 8);
}

// Two numbers: latitude and longitude where they can be, else easting and northing; null where neither.
function readCoordinates(words) {
  const numbers = words.trim().split(/[\s,;]+/).map(Number);
  if (numbers.length !== 2 || !numbers.every(Number.isFinite)) return null;
  const [first, second] = numbers;
  if (Math.abs(first) <= 90 && Math.abs(second) <= 180) return [first, second];
  return toDegrees(...fromRegion(first, second));
}

function startSearch(openPlace, openAt, say) {
  const form = document.getElementById("search");
  const input = document.getElementById("wanted");
  const list = document.getElementById("found");
  const close = () => {
    list.hidden = true;
    list.replaceChildren();
  };
  const choose = (kind, place) => {
    close();
    openPlace(kind, place);
  };
  input.addEventListener("input", () => {
    const hits = findPlaces(input.value);
    list.replaceChildren(...hits.map(({ kind, place }) => make("li", {},
      make("button", { type: "button", click: () => choose(kind, place) }, `${kind} `, named(place.name)))));
    list.hidden = !hits.length;
  });
  form.addEventListener("submit", (event) => {
    event.preventDefault();
    const [hit] = findPlaces(input.value);
    const at = hit ? null : readCoordinates(input.value);
    if (hit) choose(hit.kind, hit.place);
    else if (at) openAt(at);
    else say("Nothing found under these words.");
  });
  form.addEventListener("keydown", (event) => {
    if (event.key === "Escape") close();
    const buttons = [...list.querySelectorAll("button")];
    const step = { ArrowDown: 1, ArrowUp: -1 }[event.key];
    if (!step || !buttons.length) return;
    event.preventDefault();
    const at = buttons.indexOf(document.activeElement) + step;
    if (at < 0) input.focus();
    else buttons[Math.min(at, buttons.length - 1)].focus();
  });
  form.addEventListener("focusout", (event) => {
    if (!form.contains(event.relatedTarget)) close();
  });
}
