"use strict";
// coupons: [{batch, well, width_mm, png}], items: [[coupon]] or [[left, right]] as shown in turn.
const page = /*PAGE*/null;
const pairs = page.mode === "pairs";
const zooms = [0.3, 0.4, 0.5, 0.6, 0.75, 0.9, 1, 1.25, 1.5, 2, 3, 4];
const element = (id) => document.getElementById(id);

// What the browser keeps: the grader at work, and each grader's judgements.
const graderKey = "coupon-grades:" + page.id;
const stateKey = (grader) => graderKey + ":" + grader;
const memory = new Map();
let keeps = true;
let grader = "";
let state = null;  // {at: item, given: {item: judgement}, zoom: index into zooms}

function keepText(key, text) {
  memory.set(key, text);
  try {
    localStorage.setItem(key, text);
  } catch (error) {
    keeps = false;
  }
  element("unkept").hidden = keeps;
}

function keptText(key) {
  try {
    return localStorage.getItem(key) ?? memory.get(key) ?? null;
  } catch (error) {
    return memory.get(key) ?? null;
  }
}

const keep = () => keepText(stateKey(grader), JSON.stringify(state));

function recall(name) {
  grader = name;
  state = {at: 0, given: {}, zoom: null};
  try {
    Object.assign(state, JSON.parse(keptText(stateKey(grader))));
  } catch (error) {
    // Damaged from outside: the page must still open.
  }
  keepText(graderKey, grader);
}

const given = () => state.given[state.at];
const isGiven = (at) => state.given[at] !== undefined;
const itemNumbers = page.items.map((item, at) => at);

// ---- Showing

function show(section) {
  for (const id of ["start", "judge", "done"]) element(id).hidden = id !== section;
  element("who").textContent = grader;
  element("keys").hidden = section === "done";
  const count = state === null ? 0 : itemNumbers.filter(isGiven).length;
  element("bar").value = count / page.items.length;
  element("progress").textContent =
      section === "judge" ? `${state.at + 1} of ${page.items.length}` : "";
}

const pictures = new Map();
function pictureOf(coupon) {
  if (!pictures.has(coupon)) {
    const image = document.createElement("img");
    image.src = "data:image/png;base64," + page.coupons[coupon].png;
    image.draggable = false;
    pictures.set(coupon, image);
  }
  return pictures.get(coupon);
}

const pxPerMm = () => page.css_px_per_mm * zooms[state.zoom];
const views = () => [...element("frame").children];

// A pair lies side by side, or one above the other where that shows more of them.
const isStacked = () => pairs && element("frame").clientHeight > element("frame").clientWidth;

function arrange() {
  element("frame").classList.toggle("stacked", isStacked());
  element("left").textContent = isStacked() ? "Upper is better" : "Left is better";
  element("right").textContent = isStacked() ? "Lower is better" : "Right is better";
}

// The largest zoom at which the largest coupon is seen whole: the same for all that follow.
function zoomToFit() {
  const frame = element("frame");
  const frameBorders = 8;
  const width = frame.clientWidth, height = frame.clientHeight;
  const across = (pairs && !isStacked() ? (width - 12) / 2 : width) - frameBorders;
  const down = (isStacked() ? (height - 12) / 2 : height) - frameBorders;
  const largest = Math.max(...page.coupons.map((coupon) => coupon.width_mm));
  const fit = Math.min(across, down) / largest / page.css_px_per_mm;
  return Math.max(0, zooms.filter((zoom) => zoom <= fit).length - 1);
}

function sizePictures() {
  for (const view of views()) {
    // Whatever is in the middle stays there.
    const image = view.firstChild;
    const before = image.clientWidth || 1;
    const middle = [view.scrollLeft + view.clientWidth / 2, view.scrollTop + view.clientHeight / 2];
    // One scale for all: the picture's width in mm times one number of CSS pixels a millimetre.
    image.style.width = page.coupons[view.dataset.coupon].width_mm * pxPerMm() + "px";
    const grown = image.clientWidth / before;
    view.scrollLeft = middle[0] * grown - view.clientWidth / 2;
    view.scrollTop = middle[1] * grown - view.clientHeight / 2;
  }
  element("ruler").style.width = 5 * pxPerMm() + "px";
  element("zoom").textContent = `${Math.round(zooms[state.zoom] * 100)} %`;
  element("smaller").disabled = state.zoom === 0;
  element("larger").disabled = state.zoom === zooms.length - 1;
}

function drawItem() {
  show("judge");
  arrange();
  const names = pairs ? ["first coupon", "second coupon"] : ["coupon"];
  element("frame").replaceChildren(...page.items[state.at].map((coupon, side) => {
    const view = document.createElement("div");
    view.className = pairs ? "view choice" : "view";
    view.dataset.coupon = coupon;
    const image = pictureOf(coupon);
    image.alt = names[side];
    view.append(image);
    if (pairs) letClickChoose(view, side);
    letMouseDrag(view);
    return view;
  }));
  sizePictures();
  for (const view of views()) {
    view.scrollLeft = (view.scrollWidth - view.clientWidth) / 2;
    view.scrollTop = (view.scrollHeight - view.clientHeight) / 2;
  }
  drawJudgement();
  for (const coupon of page.items[state.at + 1] ?? []) pictureOf(coupon).decode().catch(() => {});
}

function drawJudgement() {
  for (const button of element("grades").children) {
    const chosen = Number(button.value) === given();
    button.setAttribute("aria-checked", chosen);
    button.tabIndex = chosen || (!isGiven(state.at) && button.value === "5.5") ? 0 : -1;
  }
  [["left", 0], ["right", 1], ["same", null]].forEach(([id, choice]) => {
    element(id).setAttribute("aria-pressed", given() === choice);
    element(id).classList.toggle("main", given() === choice);
  });
  views().forEach((view, side) => view.classList.toggle("chosen", pairs && given() === side));
  element("back").disabled = state.at === 0;
  const last = state.at === page.items.length - 1;
  element("next").textContent = last ? "Finish" : isGiven(state.at) ? "Next" : "Skip";
  element("next").classList.toggle("main", isGiven(state.at) && !pairs);
  element("bar").value = itemNumbers.filter(isGiven).length / page.items.length;
}

// ---- Judging

// The one grade that Tab reaches. From there Enter goes on, whatever was clicked before.
function focusGrade() {
  element("grades").querySelector("[tabindex='0']").focus({preventScroll: true});
}

function give(judgement) {
  state.given[state.at] = judgement;
  keep();
  drawJudgement();
  if (pairs) step(1);
  else focusGrade();
}

const grade = (value) => give(Math.min(10, Math.max(1, value)));
const move = (by) => grade(isGiven(state.at) ? given() + by : 5.5);
const toHalf = () => isGiven(state.at) && grade(given() + (Number.isInteger(given()) ? 0.5 : -0.5));

function step(by) {
  const to = state.at + by;
  if (to >= page.items.length) return finish();
  if (to < 0) return;
  const amongGrades = element("grades").contains(document.activeElement);
  state.at = to;
  keep();
  drawItem();
  if (amongGrades) focusGrade();
}

function changeZoom(by) {
  state.zoom = Math.min(zooms.length - 1, Math.max(0, state.zoom + by));
  keep();
  sizePictures();
}

function pan(across, down) {
  const share = 0.2;
  for (const view of views()) {
    view.scrollBy(across * share * view.clientWidth, down * share * view.clientHeight);
  }
}

let dragged = false;
function letMouseDrag(view) {
  view.addEventListener("pointerdown", (event) => {
    dragged = false;
    if (event.pointerType !== "mouse" || event.button !== 0) return;
    const from = [view.scrollLeft + event.clientX, view.scrollTop + event.clientY];
    const at = [event.clientX, event.clientY];
    const follow = (moved) => {
      dragged ||= Math.hypot(moved.clientX - at[0], moved.clientY - at[1]) > 5;
      view.scrollTo(from[0] - moved.clientX, from[1] - moved.clientY);
    };
    window.addEventListener("pointermove", follow);
    window.addEventListener("pointerup", () => window.removeEventListener("pointermove", follow),
                            {once: true});
  });
}

// A double click must not answer the next pair too.
function letClickChoose(view, side) {
  view.addEventListener("click", (event) => {
    if (!dragged && event.detail < 2) give(side);
  });
}

function onKey(event) {
  if (element("judge").hidden || event.ctrlKey || event.metaKey || event.altKey) return;
  const keys = event.shiftKey && event.key.startsWith("Arrow") ? panKeys : judgeKeys;
  const action = keys[event.key];
  const ownKey = event.key === "Enter" && event.target.tagName === "BUTTON" &&
      event.target.parentElement !== element("grades");
  if (!action || ownKey) return;
  event.preventDefault();
  // A key held down must not run through the coupons.
  if (!event.repeat || keys === panKeys) action();
}

const panKeys = {"ArrowLeft": () => pan(-1, 0), "ArrowRight": () => pan(1, 0),
                 "ArrowUp": () => pan(0, -1), "ArrowDown": () => pan(0, 1)};
const stepIfGiven = () => isGiven(state.at) && step(1);
const judgeKeys = {
  "+": () => changeZoom(1), "=": () => changeZoom(1), "-": () => changeZoom(-1),
  "Backspace": () => step(-1), "PageUp": () => step(-1), "PageDown": () => step(1),
  "Enter": stepIfGiven,
};
if (pairs) {
  Object.assign(judgeKeys, {"ArrowLeft": () => give(0), "ArrowRight": () => give(1),
                            "ArrowDown": () => give(null)});
} else {
  Object.assign(judgeKeys, {"0": () => grade(10), ".": toHalf, ",": toHalf,
                            "ArrowUp": () => move(0.5), "ArrowDown": () => move(-0.5),
                            "ArrowRight": stepIfGiven, "ArrowLeft": () => step(-1)});
  for (let digit = 1; digit <= 9; ++digit) judgeKeys[digit] = () => grade(digit);
}

// ---- Saving

const count = (number, one, many) => `${number} ${number === 1 ? one : many}`;

function finish() {
  show("done");
  const open = itemNumbers.filter((at) => !isGiven(at)).length;
  const untold = itemNumbers.filter((at) => state.given[at] === null).length;
  let text = open === 0 ? `All ${page.items.length} judgements are given.`
      : `${page.items.length - open} of ${page.items.length} judgements are given. You can save ` +
        "these, or go on: now, or another day with this page.";
  if (untold > 0) text += ` ${count(untold, "pair", "pairs")} without a better one are left out.`;
  element("summary").textContent = text;
  element("return").textContent = open > 0 ? "Go on" : "Go back";
  element("saved").textContent = "";
  element("save").disabled = open + untold === page.items.length;
  element(element("save").disabled ? "return" : "save").focus();
}

function goOn() {
  state.at = itemNumbers.find((at) => !isGiven(at)) ?? state.at;
  keep();
  drawItem();
}

// Told only after all is saved: coupons come again unannounced.
function steadiness() {
  const slip = 4;  // so far apart, two grades of one coupon are refused by "laygauge calibrate"
  const first = new Map();
  const apart = [];
  let text = "";
  page.items.forEach(([coupon], at) => {
    if (!first.has(coupon)) return first.set(coupon, at);
    const before = first.get(coupon);
    apart.push(Math.abs(state.given[at] - state.given[before]));
    if (apart.at(-1) < slip) return;
    text += ` Pictures ${before + 1} and ${at + 1} are one coupon, graded ` +
        `${state.given[before]} and ${state.given[at]}: correct the slip, and save again.`;
  });
  if (apart.length === 0) return "";
  const mean = apart.reduce((a, b) => a + b, 0) / apart.length;
  return ` ${count(apart.length, "coupon", "coupons")} came twice: your two grades of one were ` +
      `${mean.toFixed(2)} apart on average.` + text;
}

const field = (text) => /[",\r\n]/.test(text) ? '"' + text.replaceAll('"', '""') + '"' : text;

function table() {
  const rows = [pairs ? ["grader", "better_batch", "better_well", "worse_batch", "worse_well"]
                      : ["grader", "batch", "well", "grade"]];
  const named = (coupon) => [page.coupons[coupon].batch, page.coupons[coupon].well];
  page.items.forEach((item, at) => {
    const judgement = state.given[at];
    if (judgement === undefined || judgement === null) return;
    if (pairs) rows.push([grader, ...named(item[judgement]), ...named(item[1 - judgement])]);
    else rows.push([grader, ...named(item[0]), judgement.toFixed(1)]);
  });
  return rows.map((row) => row.map(field).join(",") + "\n").join("");
}

function save() {
  const link = document.createElement("a");
  const sign = grader.replace(/[^\p{L}\p{N}_-]+/gu, "-");
  link.download = `${pairs ? "pairs" : "grades"}-${sign}.csv`;
  link.href = URL.createObjectURL(new Blob([table()], {type: "text/csv"}));
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 10000);
  element("saved").textContent = `Saved as ${link.download}, where this browser puts downloads.` +
      (!pairs && itemNumbers.every(isGiven) ? steadiness() : "");
}

// ---- Beginning

function begin() {
  show("judge");  // the stage has its size only while it is shown
  if (state.zoom === null) state.zoom = zoomToFit();
  keep();
  drawItem();
}

function anotherGrader() {
  grader = "";
  state = null;
  keepText(graderKey, "");
  element("grader").value = "";
  askName();
}

function askName() {
  show("start");
  element("grader").focus();
}

const help = pairs
    ? "<kbd>←</kbd> left (upper), <kbd>→</kbd> right (lower) is better, " +
      "<kbd>↓</kbd> cannot tell, <kbd>Backspace</kbd> back"
    : "<kbd>1</kbd>…<kbd>9</kbd> <kbd>0</kbd>=10, <kbd>.</kbd> half, <kbd>↑</kbd> <kbd>↓</kbd> " +
      "half a step, <kbd>Enter</kbd> <kbd>→</kbd> next, <kbd>←</kbd> back";

function build() {
  element("seed").textContent = page.seed;
  element("task").textContent = pairs
      ? `You will see ${page.items.length} pairs. Choose the coupon with the better surface, on ` +
        "the scale between these two:"
      : `You will see ${page.items.length} pictures of coupons, one at a time. Grade each from ` +
        "1 to 10, in half steps. The ends of the scale:";
  element("keys").innerHTML = "Keys: " + help + ", <kbd>+</kbd> <kbd>−</kbd> zoom, " +
      "<kbd>Shift</kbd> with arrows moves the picture";
  for (let half = 2; half <= 20; ++half) {
    const button = document.createElement("button");
    button.type = "button";
    button.value = button.textContent = half / 2;
    button.className = half % 2 === 1 ? "half" : "";
    button.style.setProperty("--half", half);
    button.setAttribute("role", "radio");
    button.addEventListener("click", () => grade(half / 2));
    element("grades").append(button);
  }
  element("grade-part").hidden = pairs;
  element("pair-part").hidden = !pairs;
  document.body.classList.toggle("pairs", pairs);
  element("begin").addEventListener("submit", (event) => {
    event.preventDefault();
    const name = element("grader").value.trim();
    if (name === "") return element("grader").focus();
    recall(name);
    begin();
    if (pairs) element("left").focus();
    else focusGrade();
  });
  const actions = {back: () => step(-1), next: () => step(1), left: () => give(0),
                   right: () => give(1), same: () => give(null), larger: () => changeZoom(1),
                   smaller: () => changeZoom(-1), finish: finish, return: goOn, save: save,
                   other: anotherGrader};
  const oncePerClick = ["left", "right", "same", "next"];  // however often it is clicked in haste
  for (const [id, action] of Object.entries(actions)) {
    element(id).addEventListener("click", (event) => {
      if (event.detail < 2 || !oncePerClick.includes(id)) action();
    });
  }
  document.addEventListener("keydown", onKey);
  window.addEventListener("resize", arrange);
  // The same page in another tab: take over what is judged there.
  window.addEventListener("storage", (event) => {
    if (state === null || event.key !== stateKey(grader)) return;
    recall(grader);
    if (!element("judge").hidden) drawItem();
  });
}

build();
const atWork = keptText(graderKey);
keepText(graderKey, atWork ?? "");  // shows whether the browser keeps anything
if (atWork) {
  recall(atWork);
  begin();
} else {
  askName();
}
