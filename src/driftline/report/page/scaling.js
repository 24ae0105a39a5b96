/* The scaled variable x(W, L) of every built-in ansatz: the formulas of driftline/scaling, one function each.
   `points` holds arrays of size and disorder; `sizes` are the measured sizes in increasing order. */
const Scaling = (() => {
  "use strict";
  let softening = 1;

  const typical = (sizes) => Math.sqrt(sizes[0] * sizes[sizes.length - 1]);
  const least = (values) => values.reduce((low, value) => Math.min(low, value), Infinity);
  const most = (values) => values.reduce((high, value) => Math.max(high, value), -Infinity);

  const power = (below, above) => (delta, size, v) =>
    delta.map((d, i) => d * Math.exp(Math.log(size[i]) / v[d < 0 ? below : above]));

  const lengths = {
    "power-law": power("nu", "nu"),
    "power-law-asymmetric": power("nu_below", "nu_above"),
    "kt": (delta, size, v) => {
      const ratio = delta.map((d) => (d < 0 ? v.b_below : v.b_above) / Math.sqrt(Math.max(Math.abs(d), 1e-300)));
      const smallest = least(ratio);
      return delta.map((d, i) => Math.sign(d) * Math.asinh((size[i] * Math.exp(smallest - ratio[i])) / softening));
    },
  };

  const drifting = (shape) => (size, sizes, v) => {
    const last = sizes[sizes.length - 1];
    const span = shape(last) - shape(sizes[0]);
    const middle = shape((sizes[0] + last) / 2);
    return size.map((s) => v.W_mid + (v.D * (shape(s) - middle)) / span);
  };

  const trajectories = {
    "fixed": (size, sizes, v) => size.map(() => v.W_c),
    "inverse-drift": drifting((size) => 1 / size),
    "log-drift": drifting(Math.log),
    "linear-drift": drifting((size) => size),
  };

  const finite = (logLength) => (points, sizes, v) => {
    const logs = logLength(points.disorder, v);
    const shortest = least(logs);
    return logs.map((log, i) =>
      Math.asinh(((points.size[i] / typical(sizes)) * Math.exp(shortest - log)) / softening));
  };

  const forms = {
    "size-ratio": (points, sizes, v) =>
      points.disorder.map((w, i) => w * Math.exp(-v.kappa * Math.log(points.size[i] / typical(sizes)))),
    "finite-length": finite((disorder, v) => {
      const middle = Math.sqrt(least(disorder) * most(disorder));
      return disorder.map((w) => v.c * Math.exp(-v.alpha * Math.log(w / middle)));
    }),
    "finite-length-quadratic": finite((disorder, v) => {
      const smallest = least(disorder);
      const bend = (v.slope_high - v.slope_low) / (2 * Math.log(most(disorder) / smallest));
      return disorder.map((w) => {
        const t = Math.log(w / smallest);
        return -v.slope_low * t - bend * t * t;
      });
    }),
    "size-independent": (points) => points.disorder.slice(),
  };

  /* x of all points; `form` is {length, trajectory} or {form}. */
  function scaled(form, points, sizes, values) {
    if (form.form) return forms[form.form](points, sizes, values);
    const critical = trajectories[form.trajectory](points.size, sizes, values);
    const delta = points.disorder.map((w, i) => w - critical[i]);
    return lengths[form.length](delta, points.size.map((size) => size / typical(sizes)), values);
  }

  /* Factor from x to the x of the axis label. */
  function unit(form, sizes, values) {
    if (form.length === "power-law") return Math.pow(typical(sizes), 1 / values.nu);
    if (form.form === "size-ratio") return Math.pow(typical(sizes), -values.kappa);
    return 1;
  }

  return {
    scaled, unit, least, most, typical,
    soften(value) { softening = value; },
    parts: {
      lengths: Object.keys(lengths), trajectories: Object.keys(trajectories), forms: Object.keys(forms),
    },
  };
})();
