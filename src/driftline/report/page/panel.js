/* The controls of the panel. They stand in the page already; here they only get their meaning. */
(() => {
  "use strict";
  const find = (id) => document.getElementById(id);
  const source = find("panel-data");
  if (!source) return;
  const data = JSON.parse(source.textContent);
  const choice = find("panel-ansatz");
  const whiten = Refit.whitener(data);
  Scaling.soften(data.model.softening);
  data.points.size = data.sizes.flatMap((size, block) => Array(data.counts[block]).fill(size));
  const medians = data.fits.map((fit) => Object.fromEntries(fit.parameters.map((each) => [each.name, each.median])));
  const values = medians.map((median) => ({ ...median }));

  const current = () => Number(choice.value);
  const digits = (value) => String(Number(value.toPrecision(6)));

  /* For screen readers, which cannot see the numbers change; a complaint is for everybody. */
  function tell(text, complaint = false) {
    const status = find("panel-status");
    status.textContent = text;
    status.className = complaint ? "complaint" : "silent";
  }

  const misfit = (result) => (result === null ? "not defined here" : result.misfit.toPrecision(3));
  const reference = data.fits.map((fit, index) => Refit.at(data, fit, medians[index], whiten));

  function show() {
    const index = current();
    const result = Refit.at(data, data.fits[index], values[index], whiten);
    find("panel-misfit").textContent = misfit(result);
    find("panel-reference").textContent = misfit(reference[index]);
    if (result !== null) Plot.draw(find("panel-plot"), data, result);
  }

  /* Put the value of one parameter into its two controls, but for the one the hand is on. */
  function write(index, order, except) {
    const { name, log } = data.fits[index].parameters[order];
    const value = values[index][name];
    const slider = find(`slider-${index}-${order}`);
    const number = find(`number-${index}-${order}`);
    if (slider !== except) slider.value = log ? Math.log(value) : value;
    if (number !== except) number.value = digits(value);
    slider.setAttribute("aria-valuetext", digits(value));
    number.removeAttribute("aria-invalid");
  }

  function choose() {
    document.querySelectorAll("[data-fit]").forEach((part) => { part.hidden = Number(part.dataset.fit) !== current(); });
    show();
  }

  function reset() {
    const index = current();
    values[index] = { ...medians[index] };
    data.fits[index].parameters.forEach((_, order) => write(index, order, null));
    show();
    announce();
  }

  function announce() {
    tell(`chi-squared per point ${find("panel-misfit").textContent}`);
  }

  function wire(index, order, { name, log }) {
    const slider = find(`slider-${index}-${order}`);
    const number = find(`number-${index}-${order}`);
    slider.addEventListener("input", () => {
      values[index][name] = log ? Math.exp(Number(slider.value)) : Number(slider.value);
      write(index, order, slider);
      show();
    });
    number.addEventListener("input", () => {
      if (number.value === "" || !number.checkValidity()) {
        number.setAttribute("aria-invalid", "true");
        tell(`${name}: ${number.validationMessage || "give a number."} The picture stays as it was.`, true);
        return;
      }
      values[index][name] = Number(number.value);
      write(index, order, number);
      show();
      announce();
    });
    slider.addEventListener("change", announce);
  }

  data.fits.forEach((fit, index) => fit.parameters.forEach((each, order) => {
    wire(index, order, each);
    write(index, order, null);
  }));
  choice.value = String(data.start);  // a reload would keep the choice of before
  choice.addEventListener("change", () => { choose(); announce(); });
  find("panel-reset").addEventListener("click", reset);
  let width = 0;
  new ResizeObserver(([entry]) => {
    if (entry.contentRect.width === width) return;  // the picture's own height is no reason to draw it again
    width = entry.contentRect.width;
    show();
  }).observe(find("panel-plot").parentElement);
  find("panel-fallback").hidden = true;
  find("panel").hidden = false;
  choose();
})();
