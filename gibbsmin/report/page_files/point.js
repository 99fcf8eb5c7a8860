// The full composition of one point, beside the map; and the small card that follows the pointer.
const CARD_SPECIES = 6;

function abundance(point) {
  // A point without a solution has no order; its species stay as they are listed.
  return species.map((each) => [each, moleFraction(point, each.index)]).sort((a, b) => (b[1] - a[1]) || 0);
}

function placeWords(indices, state) {
  return axes.map((axis, i) => {
    const value = shownValue(axis, indices[i], state, data.ambient);
    return axis.kind === 'other' && axis.unit === '1' ? `${axis.title} ${value}` : value;
  }).join(', ');
}

function drawPoint(state) {
  const indices = state.hover ?? state.mark;
  const point = pointAt(indices);
  document.getElementById('point-kind').textContent = state.hover ? 'Under the pointer' : 'Marked point';
  document.getElementById('point-place').textContent = placeWords(indices, state);
  const rows = abundance(point).map(([each, value]) => {
    const row = document.createElement('tr');
    row.dataset.species = each.name;
    const name = put(row, 'th', { scope: 'row', textContent: each.label });
    if (Number.isFinite(value)) name.style.setProperty('--share', `${(100 * value).toFixed(2)}%`);
    put(row, 'td', { className: 'number', textContent: formatNumber(value) });
    const dry = dryTotal === null ? '' : each.name === data.water ? '–' : formatNumber(dryFraction(point, each.index));
    put(row, 'td', { className: 'number dry', textContent: dry });
    return row;
  });
  document.getElementById('point-species').replaceChildren(...rows);
  const results = quantities.filter((each) => ['phase', 'result', 'energy'].includes(each.kind) || each.id === 'gap');
  document.getElementById('point-results').replaceChildren(...results.map((each) => {
    const pair = document.createElement('div');
    pair.dataset.quantity = each.id;
    put(pair, 'dt', { textContent: each.label });
    put(pair, 'dd', { textContent: valueWords(each, point) });
    return pair;
  }));
}

function drawCard(state, pointer) {
  const card = document.getElementById('hover-card');
  card.hidden = !state.hover;
  if (!state.hover) return;
  const point = pointAt(state.hover);
  const quantity = quantityNamed[state.quantity];
  const list = document.createElement('table');
  abundance(point).slice(0, CARD_SPECIES).forEach(([each, value]) => {
    const row = put(list, 'tr');
    row.dataset.species = each.name;
    put(row, 'th', { textContent: each.label });
    put(row, 'td', { textContent: formatNumber(value) });
  });
  card.replaceChildren(
    put(null, 'p', { className: 'card-place', textContent: placeWords(state.hover, state) }),
    put(null, 'p', { className: 'card-value',
      textContent: `${quantity.label}: ${valueWords(quantity, point)}` }),
    list,
  );
  const left = pointer.clientX + 18 + card.offsetWidth > innerWidth ? pointer.clientX - 18 - card.offsetWidth
    : pointer.clientX + 18;
  card.style.left = `${Math.max(4, left)}px`;
  card.style.top = `${Math.max(4, Math.min(pointer.clientY + 14, innerHeight - card.offsetHeight - 8))}px`;
}
