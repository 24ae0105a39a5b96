/* The picture of the panel: collapsed points on the scaling function above, residuals below, in pixels of the window
   so that its letters keep their size on a phone. */
const Plot = (() => {
  "use strict";
  const SPACE = "http://www.w3.org/2000/svg";
  const LEFT = 58, RIGHT = 12, TOP = 10, UPPER = 290, GAP = 14, LOWER = 90, BOTTOM = 24;
  const INK = "#1b1f24", FAINT = "#9aa1a9", GRID = "#e3e6ea";

  function add(parent, name, attributes) {
    const element = document.createElementNS(SPACE, name);
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
    parent.append(element);
    return element;
  }

  /* About `count` round numbers from low to high, and their decimals. */
  function ticks(low, high, count) {
    const rough = (high - low) / count;
    const power = Math.pow(10, Math.floor(Math.log10(rough)));
    const step = [1, 2, 5, 10].map((factor) => factor * power).find((value) => value >= rough * 0.999);
    const found = [];
    for (let k = Math.ceil(low / step - 1e-9); k * step <= high + 1e-9 * step; k++) found.push(k * step);
    return { found, step };
  }

  function label(value, step) {
    const largest = Math.max(Math.abs(value), step);
    if (largest >= 1e5 || step < 1e-4) return value === 0 ? "0" : value.toExponential(2);
    return value.toFixed(Math.max(0, -Math.floor(Math.log10(step) + 1e-9)));
  }

  function padded(low, high, share) {
    const margin = high > low ? share * (high - low) : 0.05 * (Math.abs(high) || 1);
    return [low - margin, high + margin];
  }

  const line = (from, to) => (value) => to[0] + ((value - from[0]) / (from[1] - from[0])) * (to[1] - to[0]);
  const short = (value) => value.toFixed(2);

  function axes(svg, scale, width) {
    const group = add(svg, "g", {});
    for (const [top, height] of [[TOP, UPPER], [TOP + UPPER + GAP, LOWER]]) {
      add(group, "rect", {
        x: LEFT, y: top, width: width - LEFT - RIGHT, height, fill: "none", stroke: FAINT,
      });
    }
    const across = ticks(...scale.rangeX, Math.max(3, Math.floor((width - LEFT) / 100)));
    for (const value of across.found) {
      const x = scale.x(value);
      add(group, "path", { d: `M${short(x)} ${TOP}v${UPPER}m0 ${GAP}v${LOWER}`, stroke: GRID, fill: "none" });
      const text = add(group, "text", { x, y: TOP + UPPER + GAP + LOWER + 17, "text-anchor": "middle" });
      text.textContent = label(value, across.step);
    }
    for (const [range, map, count] of [[scale.rangeY, scale.y, 5], [scale.rangeR, scale.r, 4]]) {
      const up = ticks(...range, count);
      for (const value of up.found) {
        const y = map(value);
        add(group, "path", { d: `M${LEFT} ${short(y)}H${width - RIGHT}`, stroke: GRID, fill: "none" });
        const text = add(group, "text", { x: LEFT - 6, y: y + 4, "text-anchor": "end" });
        text.textContent = label(value, up.step);
      }
    }
    const zero = scale.r(0);
    add(group, "path", { d: `M${LEFT} ${short(zero)}H${width - RIGHT}`, stroke: FAINT, fill: "none" });
  }

  function scales(result, width) {
    const low = Scaling.least(result.y.map((y, i) => y - result.error[i]));
    const high = Scaling.most(result.y.map((y, i) => y + result.error[i]));
    const rangeX = padded(Scaling.least(result.x), Scaling.most(result.x), 0.04);
    const rangeY = padded(low, high, 0.05);
    const reach = 1.15 * Math.max(2.5, Scaling.most(result.residual.map(Math.abs)));
    const floor = TOP + UPPER + GAP + LOWER;
    return {
      rangeX, rangeY, rangeR: [-reach, reach],
      x: line(rangeX, [LEFT, width - RIGHT]),
      y: line(rangeY, [TOP + UPPER, TOP]),
      r: line([-reach, reach], [floor, floor - LOWER]),
    };
  }

  /* Draw `result` of Refit.at into the SVG element. */
  function draw(svg, data, result) {
    const width = Math.max(svg.clientWidth || 600, 240);
    const height = TOP + UPPER + GAP + LOWER + BOTTOM;
    svg.setAttribute("viewBox", `0 0 ${width} ${height}`);
    svg.setAttribute("height", height);
    svg.replaceChildren();
    const scale = scales(result, width);
    axes(svg, scale, width);
    const curve = result.curve.x.map((x, i) => `${short(scale.x(x))} ${short(scale.y(result.curve.y[i]))}`);
    add(svg, "path", { class: "curve", d: `M${curve.join("L")}`, stroke: INK, "stroke-width": 1.2, fill: "none" });
    let next = 0;
    data.looks.forEach((look, block) => {
      const group = add(svg, "g", { class: "points", stroke: look.colour, fill: look.filled ? look.colour : "#ffffff" });
      const bars = add(group, "path", {});
      let d = "";
      for (const end = next + data.counts[block]; next < end; next++) {
        const x = scale.x(result.x[next]);
        const ends = [-1, 1].map((sign) => scale.y(result.y[next] + sign * result.error[next]));
        d += `M${short(x)} ${short(ends[0])}V${short(ends[1])}`;
        for (const y of [scale.y(result.y[next]), scale.r(result.residual[next])]) {
          add(group, "path", { class: "marker", d: look.path, transform: `translate(${short(x)} ${short(y)})` });
        }
      }
      bars.setAttribute("d", d);
    });
  }

  return { draw };
})();
