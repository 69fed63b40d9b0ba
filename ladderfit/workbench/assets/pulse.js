// Asks the kernel, as often as it wants to be asked, whether there is anything new.
function render({ model, el }) {
  el.style.display = "none";
  let timer = null;
  const set = () => {
    clearInterval(timer);
    const every = model.get("every");
    if (every > 0) timer = setInterval(() => {
      model.set("beat", model.get("beat") + 1);
      model.save_changes();
    }, every);
  };
  model.on("change:every", set);
  set();
  return () => { clearInterval(timer); model.off("change:every", set); };
}

export default { render };
