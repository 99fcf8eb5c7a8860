// The results as the page holds them: arrays over the grid, the last axis fastest.
const data = JSON.parse(document.getElementById('chart-data').textContent);

// Three bytes a value, the upper ones of its single-precision form.
function unpacked(text) {
  const octets = atob(text);
  const count = octets.length / 3;
  const bits = new Uint32Array(count);
  for (let i = 0, at = 0; i < count; i += 1, at += 3) {
    bits[i] = ((octets.charCodeAt(at) << 8) | (octets.charCodeAt(at + 1) << 16)
      | (octets.charCodeAt(at + 2) << 24)) >>> 0;
  }
  return new Float32Array(bits.buffer);
}

const axes = data.axes;
const axisNamed = Object.fromEntries(axes.map((axis, position) => [axis.name, { ...axis, position }]));
const spanned = axes.filter((axis) => axis.values.length > 1).map((axis) => axis.name);
const strides = axes.map((_, i) => axes.slice(i + 1).reduce((size, axis) => size * axis.values.length, 1));
const species = data.species.map((each, index) => ({ ...each, index }));
const fractions = unpacked(data.fractions);
const dryTotal = data.dryTotal === null ? null : unpacked(data.dryTotal);

function pointAt(indices) {
  return indices.reduce((sum, index, axis) => sum + index * strides[axis], 0);
}

function moleFraction(point, index) {
  return fractions[point * species.length + index];
}

function dryFraction(point, index) {
  if (species[index].name === data.water) return 0 * moleFraction(point, index);
  return moleFraction(point, index) / dryTotal[point];
}

// Everything that the map can show, in the order of the chooser.
const quantities = [
  ...species.map((each) => ({
    id: `x|${each.name}`, label: `${each.label}, mole fraction`, group: 'Mole fraction', kind: 'composition',
    unit: '', at: (point) => moleFraction(point, each.index),
  })),
  ...(dryTotal === null ? [] : species.filter((each) => each.name !== data.water).map((each) => ({
    id: `dry|${each.name}`, label: `${each.label}, mole fraction in the dry gas`, group: 'Mole fraction, dry gas',
    kind: 'composition', unit: '', at: (point) => dryFraction(point, each.index),
  }))),
  ...data.quantities.map((each) => {
    const values = unpacked(each.values);
    // A temperature among the results is read in the unit chosen for the axis.
    const own = each.unit === 'K'
      ? { get unit() { return unitOf('temperature', state).symbol; },
        at: (point) => unitOf('temperature', state).show(values[point]) }
      : { unit: each.unit, at: (point) => values[point] };
    return Object.defineProperties({ id: each.name, label: each.label, group: each.group, kind: each.kind,
      flags: each.flags }, Object.getOwnPropertyDescriptors(own));
  }),
];
const quantityNamed = Object.fromEntries(quantities.map((each) => [each.id, each]));

// The value of a quantity in words: a number with its unit, or the verdict that the number stands for.
function valueWords(quantity, point) {
  const value = quantity.at(point);
  if (quantity.flags?.length) return quantity.flags[value] ?? 'not solved';
  return withUnit(formatNumber(value), quantity.unit);
}

function withUnit(text, unit) {
  return unit ? `${text} ${unit}` : text;
}
