// Answers of one question are one group: arrow keys walk them, and screen readers say the question.
let count = 0;

function group(root) {
  for (const box of root.querySelectorAll(".widget-radio-box")) {
    if (!box.dataset.lfGroup) box.dataset.lfGroup = `lf-question-${(count += 1)}`;
    for (const input of box.querySelectorAll("input")) {
      if (input.name !== box.dataset.lfGroup) input.name = box.dataset.lfGroup;
    }
    const asked = box.closest(".lf-question")?.querySelector(".lf-ask");
    box.setAttribute("role", "radiogroup");
    if (asked) box.setAttribute("aria-label", asked.textContent);
  }
}

// JupyterLab takes the arrow keys for itself unless a field is typed in.
function keep(event) {
  const answer = event.target.closest?.(".lf-draft .widget-radio-box input");
  if (answer && event.key.startsWith("Arrow")) event.stopImmediatePropagation();
}

function render({ el }) {
  const kept = (event) => keep(event); // its own, as a view may be made anew before the old one goes
  window.addEventListener("keydown", kept, true);
  let watcher = null;
  let frame = 0;
  const start = () => {
    const root = el.closest(".lf-draft");
    if (!root) {
      frame = requestAnimationFrame(start);
      return;
    }
    group(root);
    watcher = new MutationObserver(() => group(root));
    watcher.observe(root, { childList: true, subtree: true });
  };
  start();
  return () => {
    window.removeEventListener("keydown", kept, true);
    cancelAnimationFrame(frame);
    watcher?.disconnect();
  };
}

export default { render };
