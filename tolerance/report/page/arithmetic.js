"use strict";
// Normal distribution and Sobol' points, as the program itself has them.

const Arithmetic = (() => {
  // Share of a standard normal below x. Source: W. J. Cody, "Rational Chebyshev approximations for the error function",
  // Mathematics of Computation, volume 23, pages 631-637, 1969.
  const NEAR_TOP = [3.16112374387056560e0, 1.13864154151050156e2, 3.77485237685302021e2, 3.20937758913846947e3,
    1.85777706184603153e-1];
  const NEAR_BOTTOM = [2.36012909523441209e1, 2.44024637934444173e2, 1.28261652607737228e3, 2.84423683343917062e3];
  const MIDDLE_TOP = [5.64188496988670089e-1, 8.88314979438837594e0, 6.61191906371416295e1, 2.98635138197400131e2,
    8.81952221241769090e2, 1.71204761263407058e3, 2.05107837782607147e3, 1.23033935479799725e3, 2.15311535474403846e-8];
  const MIDDLE_BOTTOM = [1.57449261107098347e1, 1.17693950891312499e2, 5.37181101862009858e2, 1.62138957456669019e3,
    3.29079923573345963e3, 4.36261909014324716e3, 3.43936767414372164e3, 1.23033935480374942e3];
  const FAR_TOP = [3.05326634961232344e-1, 3.60344899949804439e-1, 1.25781726111229246e-1, 1.60837851487422766e-2,
    6.58749161529837803e-4, 1.63153871373020978e-2];
  const FAR_BOTTOM = [2.56852019228982242e0, 1.87295284992346725e0, 5.27905102951428412e-1, 6.05183413124413191e-2,
    2.33520497626869185e-3];

  function complement(y) { // of the error function, y >= 0
    if (y <= 0.46875) {
      const z = y * y;
      let top = NEAR_TOP[4] * z, bottom = z;
      for (let k = 0; k < 3; k++) {
        top = (top + NEAR_TOP[k]) * z;
        bottom = (bottom + NEAR_BOTTOM[k]) * z;
      }
      return 1 - y * (top + NEAR_TOP[3]) / (bottom + NEAR_BOTTOM[3]);
    }
    let result;
    if (y <= 4) {
      let top = MIDDLE_TOP[8] * y, bottom = y;
      for (let k = 0; k < 7; k++) {
        top = (top + MIDDLE_TOP[k]) * y;
        bottom = (bottom + MIDDLE_BOTTOM[k]) * y;
      }
      result = (top + MIDDLE_TOP[7]) / (bottom + MIDDLE_BOTTOM[7]);
    } else {
      const z = 1 / (y * y);
      let top = FAR_TOP[5] * z, bottom = z;
      for (let k = 0; k < 4; k++) {
        top = (top + FAR_TOP[k]) * z;
        bottom = (bottom + FAR_BOTTOM[k]) * z;
      }
      result = (0.5641895835477562869 - z * (top + FAR_TOP[4]) / (bottom + FAR_BOTTOM[4])) / y;
    }
    return Math.exp(-y * y) * result;
  }

  function normalShare(x) {
    const half = 0.5 * complement(Math.abs(x) * Math.SQRT1_2);
    return x < 0 ? half : 1 - half;
  }

  // Standard normal of which a share lies below it; `above` the share above, so that either tail keeps its digits.
  // Source: M. J. Wichura, "Algorithm AS 241: the percentage points of the normal distribution", Applied Statistics,
  // volume 37, pages 477-484, 1988 (PPND16).
  const A = [3.3871328727963666080e0, 1.3314166789178437745e2, 1.9715909503065514427e3, 1.3731693765509461125e4,
    4.5921953931549871457e4, 6.7265770927008700853e4, 3.3430575583588128105e4, 2.5090809287301226727e3];
  const B = [1, 4.2313330701600911252e1, 6.8718700749205790830e2, 5.3941960214247511077e3, 2.1213794301586595867e4,
    3.9307895800092710610e4, 2.8729085735721942674e4, 5.2264952788528545610e3];
  const C = [1.42343711074968357734e0, 4.63033784615654529590e0, 5.76949722146069140550e0, 3.64784832476320460504e0,
    1.27045825245236838258e0, 2.41780725177450611770e-1, 2.27238449892691845833e-2, 7.74545014278341407640e-4];
  const D = [1, 2.05319162663775882187e0, 1.67638483018380384940e0, 6.89767334985100004550e-1,
    1.48103976427480074590e-1, 1.51986665636164571966e-2, 5.47593808499534494600e-4, 1.05075007164441684324e-9];
  const E = [6.65790464350110377720e0, 5.46378491116411436990e0, 1.78482653991729133580e0, 2.96560571828504891230e-1,
    2.65321895265761230930e-2, 1.24266094738807843860e-3, 2.71155556874348757815e-5, 2.01033439929228813265e-7];
  const F = [1, 5.99832206555887937690e-1, 1.36929880922735805310e-1, 1.48753612908506148525e-2,
    7.86869131145613259100e-4, 1.84631831751005468180e-5, 1.42151175831644588870e-7, 2.04426310338993978564e-15];

  function ratio(top, bottom, x) {
    let above = top[7], below = bottom[7];
    for (let k = 6; k >= 0; k--) {
      above = above * x + top[k];
      below = below * x + bottom[k];
    }
    return above / below;
  }

  function normalQuantile(below, above = 1 - below) {
    const q = below - 0.5;
    if (Math.abs(q) <= 0.425) return q * ratio(A, B, 0.180625 - q * q);
    const r = Math.sqrt(-Math.log(Math.min(below, above)));
    const value = r <= 5 ? ratio(C, D, r - 1.6) : ratio(E, F, r - 5);
    return below < above ? -value : value;
  }

  // Point `index` of a Sobol' sequence in the order of Gray's code, as a whole number.
  function sobolPoint(shift, directions, index) {
    let point = shift, gray = index ^ (index >>> 1);
    for (let bit = 0; gray; bit++, gray >>>= 1) if (gray & 1) point ^= directions[bit];
    return point;
  }

  function wholeNumbers(base64) { // of 16 bits with a sign
    const text = atob(base64), bytes = new Uint8Array(text.length);
    for (let k = 0; k < text.length; k++) bytes[k] = text.charCodeAt(k);
    const view = new DataView(bytes.buffer), numbers = new Int16Array(bytes.length / 2);
    for (let k = 0; k < numbers.length; k++) numbers[k] = view.getInt16(2 * k, true);
    return numbers;
  }

  return {normalShare, normalQuantile, sobolPoint, wholeNumbers};
})();
