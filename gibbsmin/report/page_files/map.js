// The map: one quantity over two axes, the others held at the marked point.
const BANDS = 10;
const DEEPEST = 1e-10; // a logarithmic scale spans ten decades below the largest value at most

function slice(state, quantity) {
  const [across, up] = [axisNamed[state.across], axisNamed[state.up]];
  const indices = [...state.mark];
  return up.values.map((_, row) => across.values.map((__, column) => {
    indices[up.position] = row;
    indices[across.position] = column;
    const value = quantity.at(pointAt(indices));
    return Number.isFinite(value) ? value : null;
  }));
}

// One colour scale for all slices, so that moving a slider does not change what a colour means.
const ranges = new Map();
function rangeOf(quantity) {
  if (!ranges.has(quantity.id)) {
    let [low, high, positive] = [Infinity, -Infinity, Infinity];
    for (let point = 0; point < data.status.length; point += 1) {
      const value = quantity.at(point);
      if (!Number.isFinite(value)) continue;
      low = Math.min(low, value);
      high = Math.max(high, value);
      if (value > 0) positive = Math.min(positive, value);
    }
    ranges.set(quantity.id, { low, high, positive });
  }
  return ranges.get(quantity.id);
}

// Bands of the colour scale: their ends, width and words; null where nothing changes.
function bands(quantity, log) {
  const { low, high, positive } = rangeOf(quantity);
  if (!(high - low > 1e-9 * Math.max(Math.abs(high), Math.abs(low)))) return null;
  if (log && high > 0 && low >= 0) return logBands(Math.max(positive, high * DEEPEST), high);
  const signed = low < 0 && high > 0;
  const size = Math.max(-low, high);
  const [from, to] = signed ? [-size, size] : [low, high];
  const step = niceStep(to - from, BANDS);
  return { start: Math.floor(from / step) * step, end: Math.ceil(to / step) * step, step, signed,
    text: (place) => formatNumber(Number(place.toPrecision(8)), 4), log: false };
}

// Bands that end at 1, 2 and 5 of each decade, at 1 and 3, or at each decade: a value's place on the scale is
// counted in bands, so that all of them are equally wide.
function logBands(low, high) {
  const decades = Math.log10(high / low);
  const steps = decades < 4 ? [1, 2, 5] : decades < 7 ? [1, 3] : [1];
  const ends = [];
  for (let power = Math.floor(Math.log10(low)); power <= Math.ceil(Math.log10(high)); power += 1) {
    ends.push(...steps.map((step) => step * 10 ** power));
  }
  const first = ends.findLastIndex((end) => end <= low * 1.000001);
  const last = ends.findIndex((end) => end >= high * 0.999999);
  const kept = ends.slice(Math.max(first, 0), (last < 0 ? ends.length : last) + 1);
  const place = (value) => {
    if (!(value > kept[0])) return 0;
    const band = Math.min(Math.max(kept.findLastIndex((end) => end <= value), 0), kept.length - 2);
    return band + Math.log(value / kept[band]) / Math.log(kept[band + 1] / kept[band]);
  };
  return { start: 0, end: kept.length - 1, step: 1, place, text: (at) => formatNumber(kept[Math.round(at)], 3),
    log: true };
}

function levels({ start, end, step }) {
  return Array.from({ length: Math.round((end - start) / step) + 1 }, (_, i) => start + i * step);
}

function drawMap(state) {
  const chart = document.getElementById('map');
  if (!chart) return;
  const quantity = quantityNamed[state.quantity];
  const [across, up] = [axisNamed[state.across], axisNamed[state.up]];
  const [x, y] = [across, up].map((axis) => shownValues(axis, state, data.ambient));
  const values = slice(state, quantity);
  const scale = quantity.flags?.length ? {} : bands(quantity, state.scale === 'log');
  const traces = scale ? [(quantity.flags?.length ? verdicts : filled)(x, y, values, scale, quantity)] : [];
  traces.push(...unsolvedMarks(x, y, values), ...boundaryLines(state, across, up, x, y));
  if (state.showChecked) traces.push(...checkedMarks(state, across, up));
  const mark = [x[state.mark[across.position]], y[state.mark[up.position]]];
  traces.push({ type: 'scatter', mode: 'markers', x: [mark[0]], y: [mark[1]], hoverinfo: 'skip', cliponaxis: false,
    marker: { symbol: 'circle', size: 13, color: 'rgba(255,255,255,0.9)', line: { width: 3, color: '#111' } } });
  const layout = { ...baseLayout(), hovermode: 'closest', dragmode: 'zoom',
    uirevision: [state.across, state.up, state.temperatureUnit, state.pressureUnit].join(),
    xaxis: { ...axisLayout(across, state), range: reach(x, axisLayout(across, state).type) },
    yaxis: { ...axisLayout(up, state), range: reach(y, axisLayout(up, state).type) },
    shapes: crossLines(mark) };
  if (!scale) {
    layout.annotations = [{ text: constantWords(quantity), showarrow: false, xref: 'paper', yref: 'paper', x: 0.5,
      y: 0.5, font: { size: 15 } }];
  }
  Plotly.react(chart, traces, layout, NO_BUTTONS);
  document.getElementById('map-caption').textContent = mapWords(state, quantity);
}

function reach(values, type) {
  const [low, high] = [Math.min(...values), Math.max(...values)];
  return type === 'log' ? [Math.log10(low), Math.log10(high)] : [low, high];
}

function filled(x, y, values, scale, quantity) {
  const z = scale.log ? values.map((row) => row.map((value) => (value === null ? null : scale.place(value)))) : values;
  const marks = levels(scale);
  // Every band gets a mark where there is room for all of them.
  const shown = marks.filter((_, i) => marks.length < 14 || i % 2 === 0);
  return {
    type: 'contour', x, y, z, hoverinfo: 'none', zmin: scale.start, zmax: scale.end, zauto: false,
    autocontour: false,
    contours: { start: scale.start + scale.step, end: scale.end - scale.step, size: scale.step, coloring: 'fill',
      showlabels: !scale.log,
      labelfont: { size: 11.5, color: scale.signed || quantity.kind === 'evidence' ? '#111' : '#fff' } },
    line: { width: 0.7, color: 'rgba(255,255,255,0.75)', smoothing: 0.6 },
    colorscale: colourScale(scale.signed ? 'signed' : quantity.kind),
    colorbar: { thickness: 14, outlinewidth: 0, ticks: 'outside', ticklen: 3, tickmode: 'array',
      tickvals: shown, ticktext: shown.map(scale.text), tickcolor: colour('faint'), x: 1.01, xpad: 4,
      title: { text: plainText(quantity.unit || ''), side: 'top' } },
  };
}

// Verdicts have no contours: each point's cell has the colour of its own.
// Of the set of Okabe and Ito, which colour-blind eyes tell apart.
const VERDICT_COLOURS = ['#009e73', '#e69f00', '#d55e00', '#0072b2', '#999999', '#56b4e9', '#cc79a7'];
function verdicts(x, y, z, _, quantity) {
  const count = quantity.flags.length;
  const colours = quantity.flags.map((__, i) => VERDICT_COLOURS[i % VERDICT_COLOURS.length]);
  return {
    type: 'heatmap', x, y, z, hoverinfo: 'none', zmin: -0.5, zmax: count - 0.5, zsmooth: false,
    colorscale: colours.flatMap((each, i) => [[i / count, each], [(i + 1) / count, each]]),
    colorbar: { thickness: 14, outlinewidth: 0, tickmode: 'array', tickvals: colours.map((__, i) => i),
      ticktext: quantity.flags.map(plainText), x: 1.01, xpad: 4 },
  };
}

function crossLines([x, y]) {
  const line = { color: 'rgba(20,20,20,0.85)', width: 1, dash: 'dot' };
  const halo = { color: 'rgba(255,255,255,0.7)', width: 2.4 };
  const across = { type: 'line', xref: 'paper', x0: 0, x1: 1, y0: y, y1: y };
  const up = { type: 'line', yref: 'paper', y0: 0, y1: 1, x0: x, x1: x };
  return [{ ...across, line: halo }, { ...up, line: halo }, { ...across, line }, { ...up, line }];
}

function unsolvedMarks(x, y, values) {
  const [xs, ys] = [[], []];
  values.forEach((row, j) => row.forEach((value, i) => {
    if (value === null) {
      xs.push(x[i]);
      ys.push(y[j]);
    }
  }));
  if (!xs.length) return [];
  return [{ type: 'scatter', mode: 'markers', x: xs, y: ys, hoverinfo: 'skip', name: 'not solved', cliponaxis: false,
    marker: { symbol: 'x-thin', size: 7, line: { width: 1.3, color: colour('ink') } } }];
}

function checkedMarks(state, across, up) {
  const looks = {
    confirmed: { symbol: 'circle-open', size: 8, color: colour('ink') },
    differs: { symbol: 'square', size: 10, color: '#d55e00', line: { width: 1.5, color: '#fff' } },
    'no independent answer': { symbol: 'diamond-open', size: 10, color: '#d55e00' },
  };
  const here = data.checked.filter((point) => axes.every((axis, i) => axis.name === across.name
    || axis.name === up.name || Math.abs(point.at[i] - axis.values[state.mark[i]]) <= 1e-9 * Math.abs(point.at[i])));
  return Object.entries(looks).map(([status, marker]) => {
    const points = here.filter((point) => point.status === status);
    const at = (axis) => points.map((point) => shownSingle(axis, point.at[axis.position], state));
    return { type: 'scatter', mode: 'markers', x: at(across), y: at(up), hoverinfo: 'skip', name: status,
      cliponaxis: false, marker };
  }).filter((trace) => trace.x.length);
}

function shownSingle(axis, value, state) {
  if (axis.kind === 'other') return value * axis.factor;
  return unitOf(axis.kind, state).show(value, data.ambient);
}

// Boundaries that run along one of the two axes, at the held values of the others.
function boundaryLines(state, across, up, x, y) {
  return data.boundaries.filter((each) => each.along === across.name || each.along === up.name).map((each) => {
    const over = each.along === up.name ? across : up;
    const sizes = each.over.map((name) => axisNamed[name].values.length);
    const places = over.values.map((_, i) => {
      const flat = each.over.reduce((sum, name, k) => sum * sizes[k]
        + (name === over.name ? i : state.mark[axisNamed[name].position]), 0);
      const value = each.values[flat];
      return value === null ? null : shownSingle(axisNamed[each.along], value, state);
    });
    const labelled = Math.floor(0.8 * (places.length - 1));
    const common = { type: 'scatter', mode: 'lines+text', hoverinfo: 'skip', name: each.label,
      line: { width: 2.5, color: '#fff' }, textposition: 'bottom right',
      // White with a dark edge reads on every colour of the scales.
      textfont: { color: '#fff', size: 13, shadow: '0 0 3px #000, 0 0 2px #000, 0 0 2px #000' } };
    const own = each.along === up.name ? { x, y: places } : { x: places, y };
    const text = places.map((_, i) => (i === labelled ? plainText(each.label) : ''));
    return [{ ...common, ...own, mode: 'lines', line: { width: 5, color: 'rgba(255,255,255,0.85)' } },
      // Points as well: where neighbours have no crossing there is no line.
      { ...common, ...own, mode: 'lines+markers+text', text, line: { width: 2, color: '#111', dash: 'dash' },
        marker: { size: 5, color: '#111', line: { width: 1, color: '#fff' } } }];
  }).flat();
}

function constantWords(quantity) {
  const { low, high } = rangeOf(quantity);
  if (!Number.isFinite(low)) return 'No value at any point';
  return plainText(`Practically ${withUnit(formatNumber((low + high) / 2), quantity.unit)} everywhere`);
}

function mapWords(state, quantity) {
  const held = axes.filter((axis) => axis.name !== state.across && axis.name !== state.up)
    .map((axis) => `${axis.title} ${shownValue(axis, state.mark[axisNamed[axis.name].position], state, data.ambient)}`);
  const formula = ['composition'].includes(quantity.kind);
  const name = formula ? quantity.label : quantity.label[0].toUpperCase() + quantity.label.slice(1);
  const logarithmic = state.scale === 'log' && !quantity.flags?.length ? ', logarithmic colours' : '';
  const unsolved = slice(state, quantity).flat().filter((value) => value === null).length;
  const blank = unsolved ? ` Crosses: ${unsolved} points without a value.` : '';
  return `${withUnit(name, quantity.unit && `in ${quantity.unit}`)}${held.length ? ` at ${held.join(', ')}` : ''}${
    logarithmic}.${blank}`;
}
