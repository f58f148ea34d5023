/** The scale and the lines of a terrain section, ready to be drawn. Knows no DOM. */

/**
 * @typedef {object} ProfilePoint
 * @property {number} along_nm
 * @property {number | null} ground_ft
 * @property {number | null} required_ft
 * @property {number | null} glide_ft
 *
 * @typedef {object} Plot
 * @property {string} ground closed area
 * @property {string} surface top of the ground
 * @property {string} required
 * @property {string} glide
 * @property {{x: number, width: number}[]} voids stretches without elevation
 * @property {{at: number, value: number}[]} across ticks [px], [nm]
 * @property {{at: number, value: number}[]} up ticks [px], [ft]
 * @property {(along_nm: number) => number} toX
 * @property {(height_ft: number) => number} toY
 */

/**
 * @param {ProfilePoint[]} profile
 * @param {{left: number, right: number, top: number, bottom: number}} frame [px]
 * @returns {Plot}
 */
export function plot(profile, frame) {
  const heights = profile.flatMap((point) => [point.ground_ft, point.required_ft, point.glide_ft])
    .filter((value) => typeof value === "number");
  const low = Math.min(...heights, 0);
  const high = Math.max(...heights, low + 100);
  const length = Math.max(...profile.map((point) => point.along_nm), 0.01);
  const toX = (/** @type {number} */ along) =>
    frame.left + (along / length) * (frame.right - frame.left);
  const toY = (/** @type {number} */ height) =>
    frame.bottom - ((height - low) / (high - low)) * (frame.bottom - frame.top);
  const trace = (/** @type {"ground_ft" | "required_ft" | "glide_ft"} */ key) =>
    runs(profile, key).map((run) => path(run.map((point) =>
      [toX(point.along_nm), toY(/** @type {number} */ (point[key]))])));
  const surface = trace("ground_ft");
  const areas = runs(profile, "ground_ft").map((run, index) =>
    `${surface[index]}L${fix(toX(run[run.length - 1].along_nm))} ${frame.bottom}`
    + `L${fix(toX(run[0].along_nm))} ${frame.bottom}Z`);
  return {
    ground: areas.join(""),
    surface: surface.join(""),
    required: trace("required_ft").join(""),
    glide: trace("glide_ft").join(""),
    voids: voids(profile).map(([from, to]) => ({ x: toX(from), width: toX(to) - toX(from) })),
    across: ticks(0, length, 5).map((value) => ({ at: toX(value), value })),
    up: ticks(low, high, 4).map((value) => ({ at: toY(value), value })),
    toX,
    toY,
  };
}

/**
 * Stretches of points that have a figure.
 *
 * @param {ProfilePoint[]} profile
 * @param {"ground_ft" | "required_ft" | "glide_ft"} key
 */
function runs(profile, key) {
  /** @type {ProfilePoint[][]} */
  const found = [];
  let open = false;
  for (const point of profile) {
    const known = typeof point[key] === "number";
    if (known && open) found[found.length - 1].push(point);
    else if (known) found.push([point]);
    open = known;
  }
  return found;
}

/**
 * @param {ProfilePoint[]} profile
 * @returns {[number, number][]} along [nm], from the last known point to the next
 */
function voids(profile) {
  /** @type {[number, number][]} */
  const found = [];
  profile.forEach((point, index) => {
    if (point.ground_ft !== null) return;
    const from = profile[Math.max(index - 1, 0)].along_nm;
    const to = profile[Math.min(index + 1, profile.length - 1)].along_nm;
    const last = found[found.length - 1];
    if (last && from <= last[1]) last[1] = to;
    else found.push([from, to]);
  });
  return found;
}

/**
 * Round values, about `count` of them.
 *
 * @param {number} low
 * @param {number} high
 * @param {number} count
 * @returns {number[]}
 */
export function ticks(low, high, count) {
  const rough = (high - low) / count;
  const ten = 10 ** Math.floor(Math.log10(rough));
  const step = ([1, 2, 5, 10].find((factor) => factor * ten >= rough) ?? 10) * ten;
  const found = [];
  for (let at = Math.ceil(low / step) * step; at <= high + step * 1e-9; at += step) {
    found.push(Number(at.toPrecision(12)));
  }
  return found;
}

/** @param {number[][]} points */
function path(points) {
  return `M${points.map(([x, y]) => `${fix(x)} ${fix(y)}`).join("L")}`;
}

/** @param {number} value */
function fix(value) {
  return value.toFixed(1);
}
