// Units of temperature and pressure that people read; values are K and Pa (absolute) inside.
const scaled = (symbol, size) => ({ symbol, show: (value) => value / size });
const gauge = (symbol, size) => ({ symbol, show: (value, ambient) => (value - ambient) / size, isGauge: true });

const UNITS = {
  temperature: {
    degC: { symbol: '°C', show: (kelvin) => kelvin - 273.15 },
    K: { symbol: 'K', show: (kelvin) => kelvin },
    degF: { symbol: '°F', show: (kelvin) => kelvin * 1.8 - 459.67 },
  },
  pressure: {
    bar: scaled('bar', 1e5),
    'bar(g)': gauge('bar(g)', 1e5),
    kPa: scaled('kPa', 1e3),
    'kPa(g)': gauge('kPa(g)', 1e3),
    MPa: scaled('MPa', 1e6),
    'MPa(g)': gauge('MPa(g)', 1e6),
    mbar: scaled('mbar', 1e2),
    'mbar(g)': gauge('mbar(g)', 1e2),
    Pa: scaled('Pa', 1),
    hPa: scaled('hPa', 1e2),
    atm: scaled('atm', 101325),
    torr: scaled('torr', 101325 / 760),
    'psi(a)': scaled('psi(a)', 6894.757293168361),
    'psi(g)': gauge('psi(g)', 6894.757293168361),
  },
};
// What the chooser offers beside the unit of the scenario.
const OFFERED = {
  temperature: ['degC', 'K', 'degF'],
  pressure: ['bar', 'bar(g)', 'kPa', 'MPa', 'Pa', 'atm', 'psi(a)', 'psi(g)'],
};

function unitOf(kind, state) {
  return UNITS[kind][kind === 'temperature' ? state.temperatureUnit : state.pressureUnit];
}

// The values of an axis as shown now; an axis that is neither temperature nor pressure keeps its own unit.
function shownValues(axis, state, ambient) {
  if (axis.kind === 'other') return axis.written;
  const unit = unitOf(axis.kind, state);
  // The digits that a subtraction of 273.15 leaves behind are no information.
  return axis.values.map((value) => Number(unit.show(value, ambient).toPrecision(10)));
}

function unitSymbol(axis, state) {
  if (axis.kind === 'other') return axis.unit === '1' ? '' : axis.unit;
  return unitOf(axis.kind, state).symbol;
}

function shownValue(axis, index, state, ambient) {
  const text = formatNumber(shownValues(axis, state, ambient)[index], 6);
  const symbol = unitSymbol(axis, state);
  return symbol ? `${text} ${symbol}` : text;
}

function axisLabel(axis, state) {
  const symbol = unitSymbol(axis, state);
  const title = axis.title[0].toUpperCase() + axis.title.slice(1);
  return symbol ? `${title}, ${symbol}` : title;
}
