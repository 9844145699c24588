/**
 * One signal's chart: what came, what had been said of it, what is said of the time ahead. Elements are made once and only
 * their places change, so nothing jumps. It is also a slider through time, for keyboard and screen reader.
 */
import { type Attributes, say, set, shape } from './dom.ts';
import { bandPath, type Frame, medianPath, rangeOf, readingsPath, thinned, tickAt, xOf, yOf } from './geometry.ts';
import { PAST_HORIZONS, type PathPoint, type Plant } from './plant.ts';
import { timeScale } from './scale.ts';
import { limitWord, numberText, rangeText, withUnit } from './words.ts';
import type { Zone } from './zone.ts';

const LABEL_WIDTH = 7;
const MOST_POINTS = 240;
const KEY_STEPS = 120;
const LIMITS = ['high_high', 'high', 'low', 'low_low'] as const;
const FIELDS = { high_high: 'highHigh', high: 'high', low: 'low', low_low: 'lowLow' } as const;

/** See the file head. */
export class Chart {
  readonly node: SVGSVGElement;
  readonly #signal: number;
  readonly #onRead: (text: string) => void;
  readonly #ahead = shape('rect', { class: 'ahead-ground' });
  readonly #grid = shape('g', { class: 'grid' });
  readonly #said = shape('path', { class: 'said' });
  readonly #saidLine = shape('path', { class: 'said-line' });
  readonly #limits = shape('g', { class: 'limits' });
  readonly #band = shape('path', { class: 'band' });
  readonly #median = shape('path', { class: 'median' });
  readonly #readings = shape('path', { class: 'readings' });
  readonly #now = shape('line', { class: 'now' });
  readonly #cursor = shape('line', { class: 'cursor off' });
  #frame: Frame | null = null;
  #plant: Plant | null = null;
  #zone: Zone | null = null;
  readonly #height: number;
  #at: number | null = null;
  #width = 0;

  /** height  in CSS pixels; onRead  told what stands under the cursor, in words; empty without one */
  constructor(signal: number, name: string, height: number, onRead: (text: string) => void) {
    this.#signal = signal;
    this.#height = height;
    this.#onRead = onRead;
    this.node = shape('svg', {
      class: 'chart',
      height,
      role: 'slider',
      tabindex: 0,
      'aria-label': `${name}: readings, earlier forecasts and what comes next. Arrow keys move through time.`,
      'aria-valuemin': 0,
      'aria-valuemax': KEY_STEPS,
      'aria-valuenow': Math.round((KEY_STEPS * PAST_HORIZONS) / (PAST_HORIZONS + 1)),
      'aria-valuetext': 'now',
    });
    const lines = [this.#said, this.#saidLine, this.#limits, this.#band, this.#median, this.#readings];
    this.node.append(this.#ahead, this.#grid, ...lines, this.#now, this.#cursor);
    this.#listen();
  }

  /** Draws what is known; `width` in CSS pixels. isTrusted  false: the forecast must not be relied on */
  draw(plant: Plant, zone: Zone, width: number, isTrusted: boolean): void {
    this.#plant = plant;
    this.#zone = zone;
    this.#width = width;
    set(this.node, { viewBox: `0 0 ${width} ${this.#height}`, width, class: isTrusted ? 'chart' : 'chart untrusted' });
    const { newest, site } = plant;
    if (!Number.isFinite(newest) || width < 80) return;
    const ahead = thinned(plant.ahead(this.#signal), MOST_POINTS);
    const before = plant.saidBefore(this.#signal);
    const frame = this.#frameOf(plant, ahead, before);
    this.#frame = frame;
    const now = xOf(frame, newest);
    const height = frame.bottom - frame.top;
    set(this.#ahead, { x: now, y: frame.top, width: Math.max(0, frame.right - now), height });
    set(this.#now, { x1: now, x2: now, y1: frame.top, y2: frame.bottom });
    this.#drawGrid(frame, site.tick_ms, zone);
    this.#drawLimits(frame);
    const value = plant.latest(this.#signal);
    const last = plant.values(this.#signal).at(-1) ?? null;
    // The path begins at the reading it goes out from, where there is one.
    const start: PathPoint[] =
      last === null || value === null ? [] : [{ tick: newest, median: value, lower: value, upper: value }];
    set(this.#band, { d: bandPath(frame, ahead.length === 0 ? [] : [...start, ...ahead]) });
    set(this.#median, { d: medianPath(frame, ahead.length === 0 ? [] : [...start, ...ahead]) });
    set(this.#said, { d: before.map((points) => bandPath(frame, points)).join('') });
    set(this.#saidLine, { d: before.map((points) => medianPath(frame, points)).join('') });
    set(this.#readings, { d: readingsPath(frame, plant.ticks, plant.values(this.#signal)) });
    this.#read();
  }

  #frameOf(plant: Plant, ahead: readonly PathPoint[], before: readonly PathPoint[][]): Frame {
    const { site, newest } = plant;
    const { decimals, limits } = site.signals[this.#signal]!;
    const least = 8 * 10 ** -(decimals ?? 3);
    const known = LIMITS.map((name) => limits[FIELDS[name]]).filter((limit) => limit !== null);
    const values = rangeOf(plant.values(this.#signal), [ahead, ...before], known, least);
    const longest = Math.max(...values.lines.map((line) => numberText(line, values.decimals).length), 2);
    return {
      left: 8 + LABEL_WIDTH * longest,
      right: this.#width - 2,
      top: 6,
      bottom: this.#height - 20,
      fromTick: newest - PAST_HORIZONS * site.horizon,
      toTick: newest + site.horizon,
      values,
    };
  }

  #drawGrid(frame: Frame, tickMs: number, zone: Zone): void {
    const parts: SVGElement[] = [];
    for (const value of frame.values.lines) {
      const y = yOf(frame, value);
      parts.push(shape('line', { x1: frame.left, x2: frame.right, y1: y, y2: y }));
      const text = numberText(value, frame.values.decimals);
      parts.push(label(text, { x: frame.left - 6, y: y + 4, 'text-anchor': 'end' }));
    }
    const fromMs = frame.fromTick * tickMs;
    const most = Math.max(2, Math.floor((frame.right - frame.left) / 84));
    const { lines, stepMs } = timeScale(fromMs, frame.toTick * tickMs, most, zone.offsetMs(fromMs));
    for (const ms of lines) {
      const x = xOf(frame, ms / tickMs);
      parts.push(shape('line', { class: 'tick', x1: x, x2: x, y1: frame.bottom, y2: frame.bottom + 4 }));
      const isDay = zone.clock(ms) === '00:00';
      const half = 22;
      if (x - half < 0 || x + half > this.#width) continue;
      const text = isDay ? zone.day(ms) : zone.clock(ms, stepMs);
      parts.push(label(text, { x, y: this.#height - 4, 'text-anchor': 'middle', class: isDay ? 'day' : '' }));
    }
    this.#grid.replaceChildren(...parts);
  }

  /** Those in sight; all of them are listed below the chart. */
  #drawLimits(frame: Frame): void {
    const { limits, decimals } = this.#plant!.site.signals[this.#signal]!;
    const parts: SVGElement[] = [];
    for (const name of LIMITS) {
      const value = limits[FIELDS[name]];
      if (value === null) continue;
      const y = yOf(frame, value);
      if (y < frame.top || y > frame.bottom) continue;
      parts.push(shape('line', { x1: frame.left, x2: frame.right, y1: y, y2: y }));
      // On the side away from what the limit keeps clear of, where there is room.
      const isAbove = name.startsWith('high') ? y > frame.top + 14 : y > frame.bottom - 14;
      const place = { x: frame.left + 5, y: isAbove ? y - 4 : y + 12, class: 'limit-name' };
      parts.push(label(`${limitWord(name)} ${numberText(value, decimals)}`, place));
    }
    this.#limits.replaceChildren(...parts);
  }

  #listen(): void {
    const follow = (event: PointerEvent): void => {
      if (this.#frame === null) return;
      const x = ((event.clientX - this.node.getBoundingClientRect().left) / this.node.clientWidth) * this.#width;
      this.#move(tickAt(this.#frame, x));
    };
    this.node.addEventListener('pointermove', follow);
    this.node.addEventListener('pointerdown', follow);
    this.node.addEventListener('pointerleave', () => this.#move(null));
    this.node.addEventListener('blur', () => this.#move(null));
    this.node.addEventListener('keydown', (event) => {
      if (this.#frame === null || event.ctrlKey || event.altKey || event.metaKey) return;
      const { fromTick, toTick } = this.#frame;
      const newest = this.#plant!.newest;
      const step = Math.max(1, Math.round((toTick - fromTick) / KEY_STEPS));
      const to = { ArrowLeft: -step, ArrowDown: -step, ArrowRight: step, ArrowUp: step }[event.key];
      if (to !== undefined) this.#move((this.#at ?? newest) + to);
      else if (event.key === 'Home') this.#move(fromTick);
      else if (event.key === 'End') this.#move(toTick);
      else if (event.key === 'Escape') this.#move(null);
      else return;
      event.preventDefault();
    });
  }

  #move(tick: number | null): void {
    const frame = this.#frame;
    if (frame === null) return;
    this.#at = tick === null ? null : Math.round(Math.min(frame.toTick, Math.max(frame.fromTick, tick)));
    this.#read();
  }

  #read(): void {
    const frame = this.#frame!;
    const at = this.#at;
    set(this.#cursor, { class: at === null ? 'cursor off' : 'cursor' });
    if (at === null) {
      this.#onRead('');
      return;
    }
    const tick = Math.min(frame.toTick, Math.max(frame.fromTick, at));
    const x = xOf(frame, tick);
    set(this.#cursor, { x1: x, x2: x, y1: frame.top, y2: frame.bottom });
    const text = this.#words(tick);
    const share = (tick - frame.fromTick) / (frame.toTick - frame.fromTick);
    set(this.node, { 'aria-valuenow': Math.round(KEY_STEPS * share), 'aria-valuetext': text });
    this.#onRead(text);
  }

  #words(tick: number): string {
    const plant = this.#plant!;
    const { tick_ms, signals } = plant.site;
    const { decimals, unit } = signals[this.#signal]!;
    const when = this.#zone!.near(tick * tick_ms, plant.newest * tick_ms, tick_ms);
    const said = nearest([...plant.saidBefore(this.#signal).flat(), ...plant.ahead(this.#signal)], tick);
    const forecast =
      said === null
        ? ''
        : `forecast ${numberText(said.median, decimals)} (${rangeText(said.lower, said.upper, decimals)})`;
    if (tick > plant.newest) return `${when}  ${withUnit(forecast === '' ? 'no forecast' : forecast, unit)}`;
    const at = plant.ticks.findLastIndex((one) => one <= tick);
    const value = plant.values(this.#signal)[at] ?? null;
    const reading = value === null ? 'no reading' : withUnit(`reading ${numberText(value, decimals)}`, unit);
    return `${when}  ${reading}${forecast === '' ? '' : `, ${forecast}`}`;
  }
}

function label(text: string, attributes: Attributes): SVGTextElement {
  const node = shape('text', attributes);
  say(node, text);
  return node;
}

/** The point of paths nearest to a tick, within what a thinned path leaves out. */
function nearest(points: readonly PathPoint[], tick: number): PathPoint | null {
  let best: PathPoint | null = null;
  for (const point of points)
    if (best === null || Math.abs(point.tick - tick) <= Math.abs(best.tick - tick)) best = point;
  return best !== null && Math.abs(best.tick - tick) <= 12 ? best : null;
}
