// Values on a grid over a section: straight between data that are near each other, nothing anywhere else.
"use strict";

const DEPTH_GAP = {metres: 100, part: 0.25, most: 800}; // interpolated over along a cast: metres, and part of the depth
const CAST_GAP = 3; // usual distances between casts that may be interpolated over

/**
 * Return one profile per place: [{x, y: sorted, v, z}], of samples with x, y, v and z; of equal y the mean.
 *
 * z is what tells whether two samples are near each other, the depth, also where y is something else.
 */
function profilesAt(x, y, v, z = y) {
  const places = new Map();
  for (let k = 0; k < x.length; k++) {
    if (!Number.isFinite(x[k]) || !Number.isFinite(y[k]) || !Number.isFinite(v[k]) || !Number.isFinite(z[k])) continue;
    if (!places.has(x[k])) places.set(x[k], []);
    places.get(x[k]).push([y[k], v[k], z[k]]);
  }
  return [...places.keys()].sort((a, b) => a - b).map((at) => {
    const pairs = places.get(at).sort((a, b) => a[0] - b[0]), profile = {x: at, y: [], v: [], z: []};
    for (let k = 0, n; k < pairs.length; k += n) {
      let sum = 0;
      for (n = 0; k + n < pairs.length && pairs[k + n][0] === pairs[k][0]; n++) sum += pairs[k + n][1];
      profile.y.push(pairs[k][0]);
      profile.v.push(sum / n);
      profile.z.push(pairs[k][2]);
    }
    return profile;
  });
}

/** Return a profile at the levels, NaN outside its data and where their z are farther apart than gap(middle) allows. */
function atLevels(profile, levels, gap) {
  const {y, v, z} = profile, values = new Float64Array(levels.length).fill(NaN);
  let k = 0;
  for (let j = 0; j < levels.length; j++) {
    const level = levels[j];
    while (k + 1 < y.length && y[k + 1] < level) k++;
    if (!(level >= y[k]) || k + 1 >= y.length || level > y[k + 1]) continue;
    const near = Math.abs(z[k + 1] - z[k]) <= gap((z[k] + z[k + 1]) / 2);
    if (near) values[j] = v[k] + ((level - y[k]) / (y[k + 1] - y[k])) * (v[k + 1] - v[k]);
  }
  return values;
}

/** Return the usual distance between neighbouring places, their median. */
function usualDistance(places) {
  const steps = sorted(places.slice(1).map((x, k) => x - places[k]).filter((step) => step > 0));
  return steps.length ? quantile(steps, 0.5) : 1;
}

/**
 * Return {values, nx, ny}: a grid of nx columns over [x0, x1] and ny levels over [y0, y1], row by row from y0,
 * NaN where no data are near.
 */
function gridded(profiles, {x0, x1, y0, y1, nx, ny, gap}) {
  const dx = (x1 - x0) / nx, dy = (y1 - y0) / ny;
  const levels = Float64Array.from({length: ny}, (_, j) => y0 + (j + 0.5) * dy);
  const places = profiles.map((profile) => profile.x), usual = usualDistance(places);
  const columns = profiles.map((profile) => atLevels(profile, levels, gap));
  const values = new Float64Array(nx * ny).fill(NaN);
  for (let i = 0, k = -1; i < nx && places.length; i++) {
    const x = x0 + (i + 0.5) * dx;
    while (k + 1 < places.length && places[k + 1] <= x) k++;
    const before = k >= 0 ? k : null, after = k + 1 < places.length ? k + 1 : null;
    const near = before !== null && after !== null && places[after] - places[before] <= CAST_GAP * usual;
    for (let j = 0; j < ny; j++) {
      const a = before === null ? NaN : columns[before][j], b = after === null ? NaN : columns[after][j];
      let value = NaN;
      if (near && Number.isFinite(a) && Number.isFinite(b)) {
        value = a + ((x - places[before]) / (places[after] - places[before])) * (b - a);
      } else {
        const toA = Number.isFinite(a) ? x - places[before] : Infinity;
        const toB = Number.isFinite(b) ? places[after] - x : Infinity;
        const inside = places.length === 1 || (before !== null && after !== null);
        if (inside && Math.min(toA, toB) <= usual / 2) value = toA <= toB ? a : b;
      }
      values[j * nx + i] = value;
    }
  }
  return {values, nx, ny};
}

/** Return how far apart two samples of a cast may be at a depth, metres. */
function depthGap(depth) {
  return Math.min(DEPTH_GAP.most, DEPTH_GAP.metres + DEPTH_GAP.part * depth);
}
