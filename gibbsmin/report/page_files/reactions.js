// ln K against 1/T with shortcuts and measured values, and the errors of the shortcuts.
const INVERSE = 1000; // 1/T is drawn in 1/kK, and marked with temperatures

function drawReactions(state) {
  if (!data.reactions) return;
  drawConstants(state);
  drawErrors(state);
}

// Round temperatures in the unit shown, at their places on the axis of 1/T.
function temperatureMarks(kelvins, state) {
  const unit = unitOf('temperature', state);
  const shown = kelvins.map((kelvin) => unit.show(kelvin));
  const [low, high] = [Math.min(...shown), Math.max(...shown)];
  const slope = (unit.show(1000) - unit.show(0)) / 1000;
  const step = niceStep(high - low, 7);
  const marks = [];
  for (let mark = Math.ceil(low / step) * step; mark <= high + 1e-9; mark += step) marks.push(Number(mark.toPrecision(8)));
  return { tickmode: 'array', tickvals: marks.map((mark) => INVERSE / ((mark - unit.show(0)) / slope)),
    ticktext: marks.map((mark) => formatNumber(mark)) };
}

function frame() {
  return { showline: true, linecolor: colour('faint'), mirror: true, ticks: 'outside', ticklen: 4,
    tickcolor: colour('faint'), zeroline: false, gridcolor: colour('grid') };
}

function legend() {
  return { showlegend: true, legend: { orientation: 'h', y: -0.2, yanchor: 'top', x: 0, font: { size: 12 } } };
}

function drawConstants(state) {
  const chart = document.getElementById('ln-k');
  if (!chart) return;
  const { temperature: kelvins, constants, shortcuts, measured } = data.reactions;
  const inverse = (values) => values.map((kelvin) => INVERSE / kelvin);
  const unit = unitOf('temperature', state);
  const words = (values) => values.map((kelvin) => `${formatNumber(unit.show(kelvin))} ${unit.symbol}`);
  const look = (of, fallback) => lineLook(of < 0 ? fallback : of).color;
  const hover = '%{customdata}: ln K %{y:.4g}<extra>%{fullData.name}</extra>';
  const traces = constants.map((each, i) => ({ type: 'scatter', mode: 'lines', name: plainText(each.name),
    x: inverse(kelvins), y: each.values, customdata: words(kelvins), hovertemplate: hover,
    line: { color: look(i), width: 2.2 } }));
  shortcuts.forEach((each, i) => traces.push({ type: 'scatter', mode: 'lines', name: plainText(each.name),
    x: inverse(kelvins), y: each.values, customdata: words(kelvins), hovertemplate: hover,
    line: { color: look(each.of, i), width: 1.6, dash: DASHES[1 + (i % 3)] } }));
  measured.forEach((each, i) => {
    const x = inverse(each.lineTemperature);
    const own = look(each.of, i);
    traces.push({ type: 'scatter', mode: 'lines', x: [...x, ...x.slice().reverse()], y: [...each.high, ...each.low.slice().reverse()],
      fill: 'toself', fillcolor: `${own}44`, line: { width: 0 }, hoverinfo: 'skip', showlegend: false });
    traces.push({ type: 'scatter', mode: 'markers', name: plainText(each.name), x: inverse(each.temperature),
      y: each.values, customdata: words(each.temperature), hovertemplate: hover,
      error_y: each.uncertainty ? { type: 'data', array: each.uncertainty, thickness: 1.2, color: colour('ink') } : undefined,
      marker: { symbol: 'circle-open', size: 9, color: colour('ink'), line: { width: 2 } } });
  });
  Plotly.react(chart, traces, { ...baseLayout(), ...legend(), hovermode: 'closest',
    xaxis: { ...frame(), ...temperatureMarks(kelvins, state), showgrid: true,
      title: { text: `Temperature, ${unit.symbol}, on a scale of 1/T`, standoff: 8 } },
    yaxis: { ...frame(), showgrid: true, title: { text: 'ln K', standoff: 6 } } }, NO_BUTTONS);
}

function drawErrors(state) {
  const chart = document.getElementById('shortcut-error');
  if (!chart) return;
  const { temperature: kelvins, shortcuts, tolerance } = data.reactions;
  const unit = unitOf('temperature', state);
  const x = kelvins.map((kelvin) => Number(unit.show(kelvin).toPrecision(10)));
  const traces = shortcuts.map((each, i) => ({ type: 'scatter', mode: 'lines', name: plainText(each.name), x,
    y: each.error, line: { color: lineLook(each.of < 0 ? i : each.of).color, width: 2, dash: DASHES[1 + (i % 3)] },
    hovertemplate: `%{x:.6~g} ${unit.symbol}: %{y:.3~g} %<extra>%{fullData.name}</extra>` }));
  // Errors of hundreds of per cent would flatten what matters; the axis ends at ten tolerances at most.
  const largest = Math.max(...shortcuts.flatMap((each) => each.error).map((value) => Math.abs(value ?? 0)));
  const reachOf = Math.min(1.05 * largest, 10 * (tolerance ?? Infinity)) || 1;
  const band = tolerance === null ? [] : [{ type: 'rect', xref: 'paper', x0: 0, x1: 1, y0: -tolerance, y1: tolerance,
    fillcolor: colour('accent'), opacity: 0.16, line: { width: 0 }, layer: 'below' }];
  Plotly.react(chart, traces, { ...baseLayout(), ...legend(), hovermode: 'closest', shapes: band,
    xaxis: { ...frame(), showgrid: true, title: { text: `Temperature, ${unit.symbol}`, standoff: 8 },
      range: [Math.min(...x), Math.max(...x)] },
    yaxis: { ...frame(), showgrid: true, zeroline: true, zerolinecolor: colour('faint'), range: [-reachOf, reachOf],
      title: { text: 'Error, % of K', standoff: 6 } } }, NO_BUTTONS);
}
