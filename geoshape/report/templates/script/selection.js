// What is chosen: any number of shapes, one of them shown closely. Every part of the page listens.

const chosen = { shapes: [], shown: page.first };
const listeners = [];
const onChoice = (listener) => listeners.push(listener);

function choose(shapes, { show = true } = {}) {
  chosen.shapes = shapes;
  if (show && shapes.length) chosen.shown = shapes[0];
  listeners.forEach((listener) => listener(chosen));
}

function toggle(shape) {
  const others = chosen.shapes.filter((other) => other !== shape);
  choose(others.length < chosen.shapes.length ? others : [shape, ...others]);
}

onChoice(({ shapes }) => {
  const text = byId("chosen-text");
  if (!shapes.length) text.textContent = "No shape selected.";
  else if (shapes.length === 1) text.textContent = `Selected: ${page.labels[shapes[0]]}.`;
  else text.textContent = `${grouped(String(shapes.length))} shapes selected.`;
  byId("clear-choice").disabled = !shapes.length;
});

byId("clear-choice").addEventListener("click", () => choose([]));

// Anything that stands for a shape, such as a small outline, shows it closely.
document.addEventListener("click", (event) => {
  const target = event.target.closest("[data-shape]");
  if (!target) return;
  choose([Number(target.dataset.shape)]);
  if (target.dataset.jump !== undefined) {
    byId("closeup").scrollIntoView();
    byId("closeup-name").focus({ preventScroll: true });
  }
});
