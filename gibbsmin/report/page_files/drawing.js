// What the charts share: colours from the style sheet, axes, and text that cannot become a tag.
const NO_BUTTONS = { displayModeBar: false, responsive: true, showTips: false };

function colour(name) {
  return getComputedStyle(document.documentElement).getPropertyValue(`--${name}`).trim();
}

// The library reads a few tags in text, so those of a name must be written out.
function plainText(text) {
  return text.replace(/&/g, '&amp;').replace(/</g, '&lt;').replace(/>/g, '&gt;');
}

function baseLayout() {
  return {
    paper_bgcolor: 'rgba(0,0,0,0)',
    plot_bgcolor: 'rgba(0,0,0,0)',
    font: { family: getComputedStyle(document.body).fontFamily, size: 13, color: colour('ink') },
    margin: { l: 68, r: 20, t: 12, b: 54 },
    showlegend: false,
    hoverlabel: {
      bgcolor: colour('card'), bordercolor: colour('line'), align: 'left',
      font: { color: colour('ink'), size: 13 },
    },
  };
}

function axisLayout(axis, state) {
  const values = shownValues(axis, state, data.ambient);
  const log = axis.logarithmic && values.every((value) => value > 0);
  return {
    title: { text: plainText(axisLabel(axis, state)), standoff: 8 },
    type: log ? 'log' : 'linear',
    ...(log ? logTicks(values) : {}),
    showline: true, linecolor: colour('faint'), mirror: true, ticks: 'outside', ticklen: 4,
    tickcolor: colour('faint'), zeroline: false, showgrid: false, exponentformat: 'power',
  };
}

// Marks at 1, 2 and 5 of each decade that the values cover, or decades alone where there are many.
function logTicks(values) {
  const [low, high] = [Math.min(...values), Math.max(...values)];
  const marks = [];
  const steps = high / low > 1e4 ? [1] : [1, 2, 5];
  for (let power = Math.floor(Math.log10(low)); power <= Math.ceil(Math.log10(high)); power += 1) {
    marks.push(...steps.map((step) => step * 10 ** power));
  }
  const kept = marks.filter((mark) => mark >= low * 0.999 && mark <= high * 1.001);
  return { tickmode: 'array', tickvals: kept, ticktext: kept.map((mark) => formatNumber(mark, 3)) };
}

function colourScale(kind) {
  const colours = data.colours[kind];
  return colours.map((each, i) => [i / (colours.length - 1), each]);
}

function put(parent, name, properties = {}, ...children) {
  const made = document.createElement(name);
  Object.assign(made, properties);
  made.append(...children);
  parent?.append(made);
  return made;
}
