// Lines along one axis through the marked point: composition, or the quantity of the map for several values.
const DASHES = ['solid', 'dash', 'dot', 'dashdot'];
const TRACE = 0.02; // a species that nowhere reaches this share of the largest asks for a logarithmic scale
const FLOOR = 1e-12;
const LABEL_STEP = 17; // pixels between the labels at the ends of lines
const MOST_CURVES = 7;

function lineLook(position) {
  const colours = data.lineColours[colour('scheme') || 'light'];
  return { color: colours[position % colours.length],
    dash: DASHES[Math.floor(position / colours.length) % DASHES.length] };
}

function along(state, at) {
  const axis = axisNamed[state.along];
  return axis.values.map((_, i) => {
    const indices = [...state.mark];
    indices[axis.position] = i;
    const value = at(pointAt(indices), indices);
    return Number.isFinite(value) ? value : null;
  });
}

function curves(state) {
  if (state.linesShow === 'composition') {
    const at = state.basis === 'dry' ? dryFraction : moleFraction;
    return state.order.filter((index) => state.shown.has(index)
      && !(state.basis === 'dry' && species[index].name === data.water)).map((index) => ({
      label: species[index].label, look: lineLook(state.order.indexOf(index)),
      values: along(state, (point) => at(point, index)),
    }));
  }
  const axis = axisNamed[state.linesShow];
  const quantity = quantityNamed[state.quantity];
  const picked = new Set([state.mark[axis.position]]);
  const most = Math.min(MOST_CURVES, axis.values.length);
  for (let k = 0; k < most; k += 1) picked.add(Math.round((k * (axis.values.length - 1)) / Math.max(1, most - 1)));
  return [...picked].sort((a, b) => a - b).map((value, k) => ({
    label: shownValue(axis, value, state, data.ambient), look: lineLook(k),
    values: along(state, (_, indices) => {
      indices[axis.position] = value;
      return quantity.at(pointAt(indices));
    }),
  }));
}

function verticalRange(lines, log) {
  const known = lines.flatMap((line) => line.values).filter((value) => value !== null);
  if (!known.length) return [0, 1];
  const [low, high] = [Math.min(...known), Math.max(...known)];
  if (!log) {
    const room = 0.04 * (high - low || Math.abs(high) || 1);
    return [low >= 0 && low < 0.6 * high ? 0 : low - room, high + room];
  }
  const peaks = lines.map((line) => Math.max(...line.values.map((value) => value ?? 0))).filter((peak) => peak > FLOOR);
  const least = Math.min(...known.filter((value) => value > 0));
  const deepest = Math.max(Math.min(...peaks, high) * 1e-3, FLOOR, least);
  return [Math.floor(Math.log10(deepest)), Math.ceil(Math.log10(high) + 1e-9)];
}

function drawCut(state) {
  const chart = document.getElementById('cut');
  if (!chart) return;
  const axis = axisNamed[state.along];
  const x = shownValues(axis, state, data.ambient);
  const lines = curves(state);
  const composition = state.linesShow === 'composition';
  const quantity = quantityNamed[state.quantity];
  const unit = composition ? '' : quantity.unit;
  const log = state.lineScale === 'log' && lines.every((line) => line.values.every((value) => value === null || value >= 0));
  const range = verticalRange(lines, log);
  const traces = lines.map((line) => ({
    type: 'scatter', mode: x.length > 15 ? 'lines' : 'lines+markers', x, name: plainText(line.label),
    y: line.values.map((value) => (log && value !== null && value <= 0 ? 1e-300 : value)),
    line: { color: line.look.color, dash: line.look.dash, width: 2.2 }, cliponaxis: log,
    marker: { size: 4, color: line.look.color },
    customdata: line.values.map((value) => withUnit(formatNumber(value), unit)),
    hovertemplate: `${plainText(line.label)}  %{customdata}<extra></extra>`,
  }));
  const here = x[state.mark[axis.position]];
  const title = composition ? `Mole fraction${state.basis === 'dry' ? ' in the dry gas' : ''}`
    : withUnit(quantity.label, unit && `(${unit})`);
  const layout = { ...baseLayout(), hovermode: 'x unified', dragmode: 'zoom',
    margin: { l: 78, r: 92, t: 12, b: 54 },
    uirevision: [state.along, state.lineScale, state.basis, state.linesShow, state.quantity, state.temperatureUnit,
      state.pressureUnit].join(),
    xaxis: { ...axisLayout(axis, state), range: reach(x, axisLayout(axis, state).type), hoverformat: '.6g',
      unifiedhovertitle: { text: `${plainText(axis.title)} %{x:.6~g} ${plainText(unitSymbol(axis, state))}` } },
    yaxis: { title: { text: plainText(title), standoff: 6 }, type: log ? 'log' : 'linear', range,
      showgrid: true, gridcolor: colour('grid'), zeroline: false, showline: true, linecolor: colour('faint'),
      mirror: true, ticks: 'outside', ticklen: 4, tickcolor: colour('faint'), exponentformat: 'power',
      ...(log ? { dtick: Math.max(1, Math.ceil((range[1] - range[0]) / 8)), exponentformat: 'power' } : {}) },
    shapes: [{ type: 'line', yref: 'paper', y0: 0, y1: 1, x0: here, x1: here,
      line: { color: colour('faint'), width: 1.2, dash: 'dot' } }],
    annotations: endLabels(chart, lines, range, log) };
  Plotly.react(chart, traces, layout, NO_BUTTONS);
  document.getElementById('cut-caption').textContent = cutWords(state, lines);
  const wanted = composition ? null : axisNamed[state.linesShow];
  document.getElementById('species-fieldset').hidden = wanted !== null;
}

// Names at the right-hand ends of the lines, moved apart where they would overlap.
function endLabels(chart, lines, range, log) {
  const height = Math.max(120, (chart.clientHeight || 420) - 66);
  const step = LABEL_STEP / height;
  const ends = lines.map((line) => {
    const last = line.values.filter((value) => value !== null).at(-1);
    if (last === undefined) return null;
    const value = log ? Math.log10(Math.max(last, 1e-300)) : last;
    return { line, place: Math.min(1, Math.max(0, (value - range[0]) / (range[1] - range[0]))), off: value < range[0] };
  }).filter((end) => end !== null).sort((a, b) => a.place - b.place);
  for (let i = 1; i < ends.length; i += 1) ends[i].place = Math.max(ends[i].place, ends[i - 1].place + step);
  for (let i = ends.length - 1; i >= 0; i -= 1) {
    const ceiling = i === ends.length - 1 ? 1.01 : ends[i + 1].place - step;
    ends[i].place = Math.min(ends[i].place, ceiling);
  }
  return ends.map(({ line, place, off }) => ({
    xref: 'paper', yref: 'paper', x: 1, xanchor: 'left', xshift: 8, y: place, yanchor: 'middle', showarrow: false,
    text: `<span style="color:${line.look.color}"><b>–</b></span> ${plainText(line.label)}${off ? ' ↓' : ''}`,
  }));
}

function cutWords(state, lines) {
  const axis = axisNamed[state.along];
  const varied = state.linesShow === 'composition' ? null : state.linesShow;
  const held = axes.filter((each) => each.name !== axis.name && each.name !== varied)
    .map((each) => `${each.title} ${shownValue(each, state.mark[axisNamed[each.name].position], state, data.ambient)}`);
  const what = varied === null
    ? `Composition${state.basis === 'dry' ? ' of the dry gas' : ''}: ${lines.map((line) => line.label).join(', ') || 'no species chosen'}`
    : `${quantityNamed[state.quantity].label}, a line for each ${axisNamed[varied].title}`;
  return `${what[0].toUpperCase() + what.slice(1)}, along ${axis.title}${
    held.length ? ` at ${held.join(', ')}` : ''}.`;
}
