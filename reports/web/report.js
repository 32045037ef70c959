// SPDX-License-Identifier: GPL-3.0-or-later
// Draws the plots of the report page. Everything else on the page is plain HTML and is there without this script.
"use strict";
(() => {
  const data = JSON.parse(document.getElementById("plot-data").textContent);
  const ink = "#14283a", soft = "#55677a", grid = "#e3e8ed", model = "#c8500a", band = "rgba(200,80,10,0.20)";
  const blue = "#0b5c96", grey = "#7b8b9a";
  const font = '12px "Segoe UI", "Helvetica Neue", "DejaVu Sans", Arial, sans-serif';
  const plotWidth = 690;

  const finite = (values) => values.filter((v) => v !== null && Number.isFinite(v));
  const shown = (v, digits) => (v === null || v === undefined ? "–" : v.toFixed(digits).replace("-", "−"));
  const hertz = (f) => (f < 1 ? f.toFixed(2) : f < 10 ? f.toFixed(1) : f.toFixed(0));

  /** Frequencies a person would mark on a log axis. */
  function frequencyTicks(low, high) {
    const ticks = [];
    for (let decade = -3; decade <= 4; ++decade) {
      for (const digit of [1, 2, 3, 5, 7]) {
        const f = digit * 10 ** decade;
        if (f >= low * 0.999 && f <= high * 1.001) ticks.push(f);
      }
    }
    return ticks;
  }
  const labelled = (f) => /^[125]/.test((f * 1000).toPrecision(1));

  function multiples(step, low, high) {
    const values = [];
    for (let n = Math.ceil(low / step - 1e-9); n * step <= high + 1e-9; ++n) values.push(n * step);
    return values;
  }

  /** Limits that hold the values, on whole steps. */
  function wholeRange(values, step, margin) {
    const known = finite(values);
    if (known.length === 0) return [-step, step];
    const low = Math.floor((Math.min(...known) - margin) / step) * step;
    const high = Math.ceil((Math.max(...known) + margin) / step) * step;
    return [low, high];
  }

  const axisStyle = { stroke: ink, font, labelFont: font, grid: { stroke: grid, width: 1 }, ticks: { stroke: soft, width: 1, size: 5 } };
  const frequencyAxis = (last) => ({
    ...axisStyle, scale: "x", label: last ? "frequency, Hz" : undefined, labelSize: last ? 18 : 0, size: last ? 30 : 24, gap: 4,
    splits: (u, i, low, high) => frequencyTicks(low, high),
    filter: (u, splits) => splits.map((f) => (labelled(f) ? f : null)),
    values: (u, splits) => splits.map((f) => (f === null ? "" : String(Number(f.toPrecision(1))))),
  });
  const valueAxis = (label, step) => ({
    ...axisStyle, scale: "y", label, size: 52, labelSize: 20,
    ...(step ? { splits: (u, i, low, high) => multiples(step, low, high) } : {}),
    values: (u, splits) => splits.map((v) => String(Number(v.toPrecision(6))).replace("-", "−")),
  });

  /** Draws inside the plot's frame only, in canvas pixels; `scale` is pixels per CSS point. */
  function inFrame(u, draw) {
    const { ctx, bbox } = u;
    ctx.save();
    ctx.beginPath();
    ctx.rect(bbox.left, bbox.top, bbox.width, bbox.height);
    ctx.clip();
    draw(ctx, uPlot.pxRatio, bbox);
    ctx.restore();
  }

  function cross(ctx, x, y, r) {
    ctx.moveTo(x - r, y - r); ctx.lineTo(x + r, y + r);
    ctx.moveTo(x - r, y + r); ctx.lineTo(x + r, y - r);
  }

  function drawDirect(u, direct, quantity) {
    inFrame(u, (ctx, scale) => {
      ctx.strokeStyle = grey;
      ctx.lineWidth = 1.1 * scale;
      ctx.beginPath();
      direct.f.forEach((f, k) => {
        if (direct[quantity][k] !== null) cross(ctx, u.valToPos(f, "x", true), u.valToPos(direct[quantity][k], "y", true), 2.6 * scale);
      });
      ctx.stroke();
    });
  }

  /** Where a limit is missing the bar runs to the frame; where there is no bound the line is dashed and the dot hollow. */
  function drawBar(ctx, scale, bbox, x, low, high, bounded, u) {
    const bottom = low === null ? bbox.top + bbox.height : u.valToPos(low, "y", true);
    const top = high === null ? bbox.top : u.valToPos(high, "y", true);
    const known = bounded && !(low === null && high === null);
    ctx.setLineDash(known ? [] : [2 * scale, 4 * scale]);
    ctx.globalAlpha = known ? 0.5 : 0.35;
    ctx.beginPath();
    ctx.moveTo(x, bottom);
    ctx.lineTo(x, top);
    ctx.stroke();
    ctx.setLineDash([]);
    ctx.globalAlpha = 1;
  }

  /** A point beyond the frame is drawn as an arrow head at its edge. */
  function drawDot(ctx, scale, bbox, x, y, bounded) {
    const r = 2.7 * scale;
    ctx.beginPath();
    if (y < bbox.top || y > bbox.top + bbox.height) {
      const edge = y < bbox.top ? bbox.top + 1 : bbox.top + bbox.height - 1;
      const inward = y < bbox.top ? 1 : -1;
      ctx.moveTo(x, edge);
      ctx.lineTo(x - r, edge + inward * 2 * r);
      ctx.lineTo(x + r, edge + inward * 2 * r);
      ctx.closePath();
    } else {
      ctx.arc(x, y, r, 0, 2 * Math.PI);
    }
    ctx.fillStyle = bounded ? ink : "#fff";
    ctx.fill();
    ctx.lineWidth = scale;
    ctx.stroke();
  }

  function drawPoints(u, points, quantity) {
    inFrame(u, (ctx, scale, bbox) => {
      ctx.strokeStyle = ink;
      points.f.forEach((f, k) => {
        const value = points[quantity][k];
        if (value === null) return;
        const x = u.valToPos(f, "x", true);
        const bounded = points.bounded[k];
        ctx.lineWidth = 1.3 * scale;
        drawBar(ctx, scale, bbox, x, points[quantity + "Low"][k], points[quantity + "High"][k], bounded, u);
        drawDot(ctx, scale, bbox, x, u.valToPos(value, "y", true), bounded && points[quantity + "High"][k] !== null);
      });
    });
  }

  /** Nearest drawn point to the cursor, in words beside the plot. */
  function pointReadout(element, axis, quantity, unit) {
    return (u) => {
      if (u.cursor.left < 0) { element.textContent = ""; return; }
      const at = Math.log(u.posToVal(u.cursor.left, "x"));
      const { f } = axis.points;
      let nearest = 0;
      f.forEach((value, k) => { if (Math.abs(Math.log(value) - at) < Math.abs(Math.log(f[nearest]) - at)) nearest = k; });
      const p = axis.points;
      const bounds = p.bounded[nearest] ? `${shown(p[quantity + "Low"][nearest], 1)} … ${shown(p[quantity + "High"][nearest], 1)}` : "no bound";
      element.textContent = `${hertz(f[nearest])} Hz: ${shown(p[quantity][nearest], 1)} ${unit} (${bounds})`;
    };
  }

  const frequencyScale = (axis) => {
    const f = axis.coherence.f.filter((value) => value > 0);
    const low = f[0] / 1.06, high = f[f.length - 1] * 1.06;
    return { distr: 3, time: false, auto: false, range: () => [low, high] };
  };
  const cursor = (key) => ({ sync: key ? { key, scales: ["x", null] } : undefined, points: { show: false }, drag: { x: false, y: false }, y: false });

  function responsePlot(target, axis, name, quantity, label, step, margin, unit) {
    const { points, direct } = axis;
    const line = axis.model || { f: [points.f[0], points.f[points.f.length - 1]] };
    const none = line.f.map(() => null);
    const values = axis.model ? [axis.model[quantity + "Low"], axis.model[quantity + "High"], axis.model[quantity]] : [none, none, none];
    const trusted = points[quantity].filter((v, k) => points.bounded[k] && points[quantity + "High"][k] !== null);
    const known = finite(trusted).length > 0 ? trusted : points[quantity];
    const [low, high] = wholeRange(known.concat(finite(values[2])), step, margin);
    const readout = target.parentElement.querySelector(".readout");
    const ticks = (high - low) / step > 8 ? 2 * step : step;
    return new uPlot({
      width: plotWidth, height: quantity === "gain" ? 290 : 220, padding: [8, 8, 0, 0], legend: { show: false }, cursor: cursor(name),
      scales: { x: frequencyScale(axis), y: { auto: false, range: () => [low, high] } },
      axes: [frequencyAxis(quantity === "phase"), valueAxis(label, ticks)],
      series: [{}, { stroke: "transparent", width: 0, points: { show: false } }, { stroke: "transparent", width: 0, points: { show: false } },
        { stroke: model, width: 2.2, points: { show: false } }],
      bands: [{ series: [2, 1], fill: band }],
      hooks: {
        draw: [(u) => { if (direct) drawDirect(u, direct, quantity); drawPoints(u, points, quantity); }],
        setCursor: [pointReadout(readout, axis, quantity, unit)],
      },
    }, [line.f, ...values], target);
  }

  function coherencePlot(target, axis, name) {
    const lines = [
      [axis.coherence.excitationOutput, { stroke: ink, width: 1.8 }],
      [axis.coherence.excitationDemand, { stroke: blue, width: 1.5, dash: [7, 4] }],
      [axis.coherence.demandOutput, { stroke: grey, width: 1.6, dash: [2, 3] }],
    ].filter(([values]) => values);
    return new uPlot({
      width: plotWidth, height: 170, padding: [8, 8, 0, 0], legend: { show: false }, cursor: cursor(name),
      scales: { x: frequencyScale(axis), y: { auto: false, range: () => [0, 1] } },
      axes: [frequencyAxis(true), valueAxis("coherence", 0.2)],
      series: [{}, ...lines.map(([, style]) => ({ ...style, points: { show: false } }))],
    }, [axis.coherence.f, ...lines.map(([values]) => values)], target);
  }

  function validationPlot(target, axis, record) {
    return new uPlot({
      width: plotWidth, height: 210, padding: [8, 8, 0, 0], legend: { show: false }, cursor: cursor(null),
      scales: { x: { time: false } },
      axes: [{ ...axisStyle, label: "time from the record's start, s", labelSize: 18, size: 30 }, valueAxis(`${axis.output}, ${axis.unit}`)],
      series: [{}, { stroke: ink, width: 1.4, points: { show: false } }, { stroke: model, width: 2.2, points: { show: false } }],
    }, [record.time, record.measured, record.simulated], target);
  }

  for (const target of document.querySelectorAll(".plot")) {
    const axis = data[target.dataset.axis];
    const plot = target.dataset.plot;
    if (plot === "gain") responsePlot(target, axis, target.dataset.axis, "gain", `gain, dB re 1 ${axis.unit}`, 5, 2, "dB");
    else if (plot === "phase") responsePlot(target, axis, target.dataset.axis, "phase", "phase, degrees", 45, 8, "°");
    else if (plot === "coherence") coherencePlot(target, axis, target.dataset.axis);
    else validationPlot(target, axis, axis.validation[Number(plot.slice("validation-".length))]);
  }
})();
