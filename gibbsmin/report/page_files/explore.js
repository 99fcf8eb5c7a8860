// State of the page and its wiring: every control changes the state, every change draws what depends on it.
const PRINT_WIDTH = 672; // pixels across A4 between the margins of the style sheet

const element = (id) => document.getElementById(id);
const temperature = axisNamed.temperature;
const pressure = axisNamed.pressure;
const dims = ['temperature', 'pressure', ...axes.map((axis) => axis.name)];
const mapDims = [...new Set(dims)].filter((name) => spanned.includes(name));
const keyIndices = data.key.map((name) => species.findIndex((each) => each.name === name)).filter((i) => i >= 0);

const state = {
  quantity: quantities[Math.max(0, keyIndices[0] ?? 0)].id,
  scale: 'linear',
  across: mapDims[0],
  up: mapDims[1],
  mark: axes.map((axis) => Math.floor((axis.values.length - 1) / 2)),
  hover: null,
  temperatureUnit: temperature.unit in UNITS.temperature ? temperature.unit : 'K',
  pressureUnit: pressure.unit in UNITS.pressure ? pressure.unit : 'Pa',
  linesShow: 'composition',
  along: mapDims[0],
  basis: 'wet',
  lineScale: 'log',
  shown: new Set(keyIndices),
  order: [...keyIndices, ...species.map((each) => each.index).filter((i) => !keyIndices.includes(i))],
  showChecked: false,
};

let pending = false;
let ready = false; // what lies further down waits until the page answers
function draw() {
  if (pending) return;
  pending = true;
  requestAnimationFrame(() => {
    pending = false;
    drawNow();
  });
}

function drawNow() {
  drawMap(state);
  drawPoint(state);
  drawCut(state);
  if (ready) drawReactions(state);
  for (const name of spanned) {
    const [slider, axis] = [element(`slider-${name}`), axisNamed[name]];
    const text = shownValue(axis, state.mark[axis.position], state, data.ambient);
    slider.value = state.mark[axis.position];
    slider.setAttribute('aria-valuetext', text);
    element(`slider-${name}-value`).textContent = text;
  }
}

function option(select, value, text) {
  const made = put(select, 'option', { value, textContent: text });
  return made;
}

function connect(id, key, more = () => {}) {
  const select = element(id);
  if (!select) return;
  select.value = state[key];
  select.addEventListener('change', () => {
    state[key] = select.value;
    more();
    draw();
  });
}

function fillChoosers() {
  const quantity = element('quantity');
  for (const group of quantity ? new Set(quantities.map((each) => each.group)) : []) {
    const box = put(quantity, 'optgroup', { label: group });
    quantities.filter((each) => each.group === group).forEach((each) => option(box, each.id, withUnit(each.label,
      each.unit && `(${each.unit})`)));
  }
  for (const kind of ['temperature', 'pressure']) {
    const own = kind === 'temperature' ? state.temperatureUnit : state.pressureUnit;
    for (const name of new Set([...OFFERED[kind], own])) option(element(`${kind}-unit`), name, UNITS[kind][name].symbol);
  }
  for (const id of ['across', 'up', 'along']) {
    if (element(id)) mapDims.forEach((name) => option(element(id), name, axisNamed[name].title));
  }
  if (element('lines-show')) fillLinesShow();
  if (element('basis')) element('basis').parentElement.hidden = dryTotal === null;
}

// The axis of the lines cannot be the one that tells them apart.
function fillLinesShow() {
  const select = element('lines-show');
  select.replaceChildren();
  option(select, 'composition', 'composition');
  mapDims.filter((name) => mapDims.length > 1 && name !== state.along).forEach((name) => option(select, name,
    `quantity of the map, by ${axisNamed[name].title}`));
  if (state.linesShow === state.along) state.linesShow = 'composition';
  select.value = state.linesShow;
}

function fillSpecies() {
  if (!element('species-key')) return;
  state.order.forEach((index, position) => {
    const box = element(position < Math.max(keyIndices.length, 1) ? 'species-key' : 'species-more');
    const label = put(box, 'label');
    const tick = put(label, 'input', { type: 'checkbox', checked: state.shown.has(index) });
    tick.dataset.species = species[index].name;
    const swatch = put(label, 'span', { className: 'swatch' });
    const { color, dash } = lineLook(position);
    swatch.dataset.position = position;
    swatch.style.borderTopColor = color;
    swatch.style.borderTopStyle = { solid: 'solid', dash: 'dashed', dot: 'dotted', dashdot: 'dashed' }[dash];
    label.append(species[index].label);
    tick.addEventListener('change', () => {
      if (tick.checked) state.shown.add(index);
      else state.shown.delete(index);
      draw();
    });
  });
}

function connectSliders() {
  for (const name of spanned) {
    const [slider, axis] = [element(`slider-${name}`), axisNamed[name]];
    slider.max = axis.values.length - 1;
    slider.addEventListener('input', () => {
      state.mark[axis.position] = Number(slider.value);
      state.hover = null;
      draw();
    });
    slider.addEventListener('change', () => {
      element('spoken').textContent = `${placeWords(state.mark, state)}: ${abundance(pointAt(state.mark)).slice(0, 4)
        .map(([each, value]) => `${each.label} ${formatNumber(value)}`).join(', ')}`;
    });
  }
}

function indicesUnder(event) {
  const found = event.points.find((point) => ['contour', 'heatmap'].includes(point.data.type));
  if (!found) return null;
  const [row, column] = found.pointNumber;
  const indices = [...state.mark];
  indices[axisNamed[state.up].position] = row;
  indices[axisNamed[state.across].position] = column;
  return indices;
}

function connectMap() {
  const chart = element('map');
  if (!chart) return;
  chart.on('plotly_hover', (event) => {
    state.hover = indicesUnder(event);
    drawPoint(state);
    drawCard(state, event.event);
  });
  chart.on('plotly_unhover', () => {
    state.hover = null;
    drawPoint(state);
    drawCard(state);
  });
  chart.on('plotly_click', (event) => {
    const indices = indicesUnder(event);
    if (!indices) return;
    state.mark = indices;
    draw();
  });
}

function connectButtons() {
  for (const button of document.querySelectorAll('button[data-chart]')) {
    const chart = element(button.dataset.chart);
    button.addEventListener('click', () => {
      if (button.dataset.do === 'save') {
        Plotly.downloadImage(chart, { format: 'svg', filename: `${button.dataset.chart}-chart` });
        return;
      }
      Plotly.purge(chart); // and with it what was zoomed into
      drawNow();
      if (button.dataset.chart === 'map') connectMap();
    });
  }
  const checked = element('show-checked');
  if (!checked) return;
  element('checked-choice').hidden = !data.checked.length;
  checked.addEventListener('change', () => {
    state.showChecked = checked.checked;
    draw();
  });
}

// Temperatures and pressures in the text follow the choosers of units.
function rewriteText() {
  for (const each of document.querySelectorAll('.quantity')) {
    const unit = unitOf(each.dataset.kind, state);
    const value = Number(unit.show(Number(each.dataset.value), data.ambient).toPrecision(10));
    each.textContent = `${formatNumber(value, 6)} ${unit.symbol}`;
  }
}

function resized(width) {
  for (const chart of document.querySelectorAll('.chart')) {
    Plotly.relayout(chart, width ? { width, height: 400, autosize: false } : { width: null, height: null, autosize: true });
  }
}

function connectPrinting() {
  let opened = [];
  addEventListener('beforeprint', () => {
    document.documentElement.classList.add('printing');
    opened = [...document.querySelectorAll('details:not([open])')].filter((each) => !each.closest('#explorer'));
    opened.forEach((each) => { each.open = true; });
    drawNow();
    resized(PRINT_WIDTH);
  });
  addEventListener('afterprint', () => {
    document.documentElement.classList.remove('printing');
    opened.forEach((each) => { each.open = false; });
    resized(null);
    drawNow();
  });
  matchMedia('(prefers-color-scheme: dark)').addEventListener('change', () => {
    for (const each of document.querySelectorAll('.swatch')) {
      each.style.borderTopColor = lineLook(Number(each.dataset.position)).color;
    }
    draw();
  });
}

function start() {
  document.documentElement.classList.add('with-scripts');
  element('explorer').hidden = false;
  fillChoosers();
  connect('quantity', 'quantity', () => {
    const { low, high } = rangeOf(quantityNamed[state.quantity]);
    element('scale').disabled = !(low >= 0 && high > 0) || quantityNamed[state.quantity].flags?.length > 0;
  });
  connect('scale', 'scale');
  connect('across', 'across', () => keepApart('across', 'up'));
  connect('up', 'up', () => keepApart('up', 'across'));
  connect('temperature-unit', 'temperatureUnit', rewriteText);
  connect('pressure-unit', 'pressureUnit', rewriteText);
  connect('along', 'along', fillLinesShow);
  connect('lines-show', 'linesShow');
  connect('basis', 'basis');
  connect('line-scale', 'lineScale');
  fillSpecies();
  connectSliders();
  drawNow();
  connectMap();
  connectButtons();
  connectPrinting();
  performance.mark('ready');
  document.documentElement.dataset.ready = 'yes';
  ready = true;
  setTimeout(() => drawReactions(state));
}

// A map over the same axis twice is no map: the other one takes the axis that was given up.
function keepApart(changed, other) {
  if (state[changed] === state[other]) {
    state[other] = mapDims.find((name) => name !== state[changed]);
    element(other).value = state[other];
  }
}

start();
