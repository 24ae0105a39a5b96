/* The scaling function refitted at given parameters: the penalised cubic B-spline of driftline/scaling/function.py with
   the correction and amplitude of driftline/scaling/likelihood.py, roughness and noise scale held. */
const Refit = (() => {
  "use strict";

  /* First non-zero spline function at u in [0, 1] and the values of the four non-zero ones. */
  function basis(u, count) {
    const cells = count - 3;
    const first = Math.min(Math.floor(u * cells), cells - 1);
    const t = u * cells - first;
    const r = 1 - t;
    return {
      first,
      values: [r * r * r / 6, 2 / 3 - t * t + t * t * t / 2, 2 / 3 - r * r + r * r * r / 2, t * t * t / 6],
    };
  }

  /* Lower Cholesky factor in place; false where the matrix is not positive definite. */
  function cholesky(matrix) {
    for (let i = 0; i < matrix.length; i++) {
      for (let j = 0; j <= i; j++) {
        let sum = matrix[i][j];
        for (let k = 0; k < j; k++) sum -= matrix[i][k] * matrix[j][k];
        if (i !== j) matrix[i][j] = sum / matrix[j][j];
        else if (sum > 0) matrix[i][i] = Math.sqrt(sum);
        else return false;
      }
    }
    return true;
  }

  /* Overwrite `vector` by the inverse of the lower factor times it. */
  function forward(factor, vector) {
    for (let i = 0; i < factor.length; i++) {
      for (let k = 0; k < i; k++) vector[i] -= factor[i][k] * vector[k];
      vector[i] /= factor[i][i];
    }
    return vector;
  }

  function backward(factor, vector) {
    for (let i = factor.length - 1; i >= 0; i--) {
      for (let k = i + 1; k < factor.length; k++) vector[i] -= factor[k][i] * vector[k];
      vector[i] /= factor[i][i];
    }
    return vector;
  }

  /* Prior precision of the coefficients: D^T D / tau^2 + R R^T, and the correction's own. */
  function precision(model, tau, columns) {
    const matrix = Array.from({ length: columns }, () => new Float64Array(columns));
    const count = model.count;
    for (let i = 0; i + 2 < count; i++) {
      const second = [1, -2, 1];
      for (let a = 0; a < 3; a++) {
        for (let b = 0; b < 3; b++) matrix[i + a][i + b] += (second[a] * second[b]) / (tau * tau);
      }
    }
    const ramp = Array.from({ length: count }, (_, k) => (2 * k) / (count - 1) - 1);
    const square = ramp.reduce((sum, value) => sum + value * value, 0);
    const scale = model.linear_sd * model.linear_sd;
    for (let i = 0; i < count; i++) {
      for (let j = 0; j < count; j++) {
        matrix[i][j] += (1 / (count * count) + (ramp[i] * ramp[j]) / (square * square)) / scale;
      }
    }
    for (let i = count; i < columns; i++) matrix[i][i] = 1 / (model.correction_sd * model.correction_sd);
    return matrix;
  }

  /* Take the errors, or the covariance of the points of each size, off the rows in place. */
  function whitener(data) {
    let start = 0;
    const blocks = data.counts.map((count, block) => {
      const packed = data.covariances[block];
      let factor = null;
      if (packed) {
        factor = Array.from({ length: count }, () => new Float64Array(count));
        for (let i = 0, next = 0; i < count; i++) for (let j = 0; j <= i; j++) factor[i][j] = packed[next++];
        if (!cholesky(factor)) throw new Error("a covariance is not positive definite");
      }
      start += count;
      return { from: start - count, count, factor };
    });
    return (rows) => {
      for (const { from, count, factor } of blocks) {
        if (!factor) {
          for (let i = from; i < from + count; i++) {
            const weight = data.model.spread / data.points.error[i];
            for (let k = 0; k < rows[i].length; k++) rows[i][k] *= weight;
          }
          continue;
        }
        for (let k = 0; k < rows[from].length; k++) {
          const column = forward(factor, Float64Array.from({ length: count }, (_, i) => rows[from + i][k]));
          column.forEach((value, i) => { rows[from + i][k] = value * data.model.spread; });
        }
      }
      return rows;
    };
  }

  /* Everything drawn, at one set of parameter values; null where x is not finite or does not vary. */
  function at(data, fit, values, whiten) {
    const { points, sizes, model } = data;
    const x = Scaling.scaled(fit.form, points, sizes, values);
    const low = Scaling.least(x);
    const span = Scaling.most(x) - low;
    if (!(Number.isFinite(span) && span > 0 && x.every(Number.isFinite))) return null;
    const kappa = fit.exponent === null ? values.kappa_A : fit.exponent;
    const amplitude = points.size.map((size) =>
      fit.amplitude ? Math.exp(kappa * Math.log(size / Scaling.typical(sizes))) : 1);
    const weight = points.size.map((size) => Math.exp(-values.omega * Math.log(size / sizes[0])));
    const columns = model.count + (fit.corrected ? 2 : 0);
    const design = x.map((value, i) => {
      const row = new Float64Array(columns + 1);
      const u = (value - low) / span;
      const four = basis(u, model.count);
      four.values.forEach((number, k) => { row[four.first + k] = number; });
      if (fit.corrected) row.set([weight[i], weight[i] * (2 * u - 1)], model.count);
      for (let k = 0; k < columns; k++) row[k] *= amplitude[i];
      row[columns] = (points.mean[i] - amplitude[i] * model.centre) / model.spread;
      return row;
    });
    const solved = solve(whiten(design.map((row) => row.slice())), fit, model, columns);
    return solved && shown(data, fit, { x, low, span, amplitude, design, columns, values }, solved);
  }

  /* Posterior mean of the coefficients and chi-squared per point of the whitened rows. */
  function solve(rows, fit, model, columns) {
    const matrix = precision(model, fit.tau, columns);
    for (const row of matrix) for (let k = 0; k < columns; k++) row[k] *= fit.s * fit.s;
    const right = new Float64Array(columns);
    for (const row of rows) {
      for (let i = 0; i < columns; i++) {
        if (row[i] === 0) continue;
        right[i] += row[i] * row[columns];
        for (let j = 0; j <= i; j++) matrix[i][j] += row[i] * row[j];
      }
    }
    if (!cholesky(matrix)) return null;
    const coefficients = backward(matrix, forward(matrix, right));
    let total = 0;
    for (const row of rows) {
      let offset = row[columns];
      for (let k = 0; k < columns; k++) offset -= row[k] * coefficients[k];
      total += offset * offset;
    }
    return { coefficients, misfit: total / rows.length };
  }

  /* Points freed of amplitude and correction, residuals, and the scaling function, in the units of the file. */
  function shown(data, fit, state, { coefficients, misfit }) {
    const { points, model } = data;
    const unit = Scaling.unit(fit.form, data.sizes, state.values);
    const part = (row, from, to) => {
      let sum = 0;
      for (let k = from; k < to; k++) sum += row[k] * coefficients[k];
      return model.spread * sum;
    };
    const { amplitude, design, columns } = state;
    const correction = design.map((row) => part(row, model.count, columns));
    const fitted = design.map((row, i) => amplitude[i] * model.centre + part(row, 0, columns));
    const grid = Array.from({ length: 201 }, (_, i) => i / 200);
    return {
      misfit, fitted,
      x: state.x.map((value) => value * unit),
      y: points.mean.map((mean, i) => (mean - correction[i]) / amplitude[i]),
      error: points.error.map((error, i) => error / amplitude[i]),
      residual: points.mean.map((mean, i) => (mean - fitted[i]) / points.error[i]),
      curve: {
        x: grid.map((u) => (state.low + u * state.span) * unit),
        y: grid.map((u) => {
          const four = basis(u, model.count);
          const sum = four.values.reduce((total, value, k) => total + value * coefficients[four.first + k], 0);
          return model.centre + model.spread * sum;
        }),
      },
    };
  }

  return { at, whitener };
})();
