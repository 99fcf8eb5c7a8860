// Numbers as people write them: at most `digits` significant ones, powers of ten for the very small and large.
const RAISED = { '-': '⁻', 0: '⁰', 1: '¹', 2: '²', 3: '³', 4: '⁴', 5: '⁵', 6: '⁶', 7: '⁷', 8: '⁸', 9: '⁹' };
const SMALLEST_PLAIN = 1e-3;
const LARGEST_PLAIN = 1e5;

function formatNumber(value, digits = 4) {
  if (value === null || !Number.isFinite(value)) return 'not solved';
  if (value === 0) return '0';
  const size = Math.abs(value);
  if (size >= SMALLEST_PLAIN && size < LARGEST_PLAIN) {
    return String(Number(value.toPrecision(digits))).replace('-', '−');
  }
  const [mantissa, exponent] = value.toExponential(digits - 1).split('e');
  const front = String(Number(mantissa));
  const power = `10${[...String(Number(exponent))].map((sign) => RAISED[sign]).join('')}`;
  return (front === '1' ? power : `${front}×${power}`).replace('-', '−');
}

// A step of 1, 2, 2.5 or 5 times a power of ten that cuts a span into about `count` parts.
function niceStep(span, count) {
  const rough = span / count;
  const power = 10 ** Math.floor(Math.log10(rough));
  return power * [1, 2, 2.5, 5, 10].find((step) => step * power >= rough * 0.999);
}
