// One or two thumbs with number fields.  Input events are trials, change events are settled.
const STEPS = 400;

function render({ model, el }) {
  el.classList.add("lf-range");
  const log = model.get("log"), low = model.get("low"), high = model.get("high");
  const forth = (v) => log ? Math.log(v / low) / Math.log(high / low) : (v - low) / (high - low);
  const back = (t) => log ? low * (high / low) ** t : low + (high - low) * t;
  const round = (v) => Number(v.toPrecision(model.get("digits")));
  const inside = (v) => Math.min(Math.max(v, low), high);
  const count = model.get("value").length;
  const names = count === 2 ? [" from", " to"] : [""];
  let held = false;

  const head = document.createElement("div");
  head.className = "lf-range-head";
  const label = document.createElement("span");
  label.className = "lf-label";
  label.textContent = model.get("label");
  head.appendChild(label);
  const fields = document.createElement("span");
  fields.className = "lf-fields";
  head.appendChild(fields);
  const track = document.createElement("div");
  track.className = `lf-track${count === 2 ? " lf-two" : ""}`;
  const bar = document.createElement("div");
  bar.className = "lf-bar";
  track.appendChild(bar);
  el.append(head, track);

  const boxes = [], thumbs = [];
  for (let i = 0; i < count; i++) {
    const box = document.createElement("input");
    box.type = "text";
    box.inputMode = "decimal";
    box.setAttribute("aria-label", `${model.get("label")}${names[i]}, number`);
    if (i) fields.append(" to ");
    fields.appendChild(box);
    boxes.push(box);
    const thumb = document.createElement("input");
    thumb.type = "range";
    thumb.min = 0;
    thumb.max = STEPS;
    thumb.setAttribute("aria-label", `${model.get("label")}${names[i]}`);
    track.appendChild(thumb);
    thumbs.push(thumb);
  }
  if (model.get("unit")) fields.append(` ${model.get("unit")}`);

  const show = () => {
    const value = model.get("value");
    value.forEach((v, i) => {
      boxes[i].value = String(round(v));
      thumbs[i].setAttribute("aria-valuetext", `${round(v)} ${model.get("unit")}`);
      if (!held) thumbs[i].value = Math.round(STEPS * forth(inside(v)));
    });
    const ends = value.map((v) => 100 * forth(inside(v)));
    bar.style.left = `${count === 2 ? ends[0] : 0}%`;
    bar.style.width = `${count === 2 ? Math.max(ends[1] - ends[0], 0) : ends[0]}%`;
  };
  const send = (value, settled) => {
    model.set("value", value);
    model.set("request", { number: (model.get("request").number || 0) + 1, settled, value });
    show();
    model.save_changes();
  };
  const moved = (i, settled) => {
    const value = [...model.get("value")];
    const there = round(back(Number(thumbs[i].value) / STEPS));
    value[i] = count === 2 ? (i === 0 ? Math.min(there, value[1]) : Math.max(there, value[0])) : there;
    send(value, settled);
  };
  thumbs.forEach((thumb, i) => {
    thumb.addEventListener("input", () => { held = true; moved(i, false); });
    thumb.addEventListener("change", () => { held = false; moved(i, true); });
    thumb.addEventListener("blur", () => { held = false; });
  });
  boxes.forEach((box, i) => box.addEventListener("change", () => {
    const typed = Number(box.value.trim().replace(",", "."));
    if (box.value.trim() === "" || !Number.isFinite(typed)) { show(); return; }
    const value = [...model.get("value")];
    value[i] = typed;
    send(value, true);
  }));
  const keep = (event) => event.stopPropagation();
  el.addEventListener("keydown", keep);
  model.on("change:value", show);
  show();
}

export default { render };
