// The wavefront at one instant, stepped and played. Playing draws from replies of many frames each, never one by one.

import { address } from '../api.js';
import { debounced, element, fromTemplate, part } from '../dom.js';
import { createFigure } from '../figure.js';
import { mapTable } from '../export.js';
import { limitControls } from '../limit_controls.js';
import { parseNpy } from '../npy.js';
import { numberText, steppedText, wholeText } from '../numbers.js';
import { diverging } from '../plots/colour_maps.js';
import { heatMap, mapNodes } from '../plots/heat_map.js';
import { paperPalette } from '../plots/palette.js';
import { extent, symmetricLimits } from '../plots/scales.js';
import { createQuestion } from '../question.js';
import { quantityText, unitText } from '../units.js';
import { preparation } from '../view_state.js';

const blockBytes = 8 * 1024 * 1024; // of one reply of frames; a second of playing at 512 by 512 points
const mostFrames = 240;

/** Window parameters choose frames here, so those of the preparation stay out. */
function frameParameters(state) {
  const { from, to, first, last, ...rest } = preparation(state);
  return rest;
}

export function mount(root, { api, go }) {
  const figure = createFigure({ name: 'frames', title: 'Wavefront' });
  root.append(figure.root);
  const transport = fromTemplate('transport');
  figure.transport.append(transport);
  const find = (selector) => part(transport, selector, 'panel frames');
  const back = find('.step-back'),
    forward = find('.step-forward'),
    play = find('.play'),
    slider = find('.frame-slider');
  const label = find('.frame-label'),
    speed = find('.speed');
  const limits = limitControls({ name: 'frame_limit', go, isSymmetric: true });
  figure.controls.append(limits.root);
  if (matchMedia('(prefers-reduced-motion: reduce)').matches) speed.value = '2';

  let state = null,
    view = null;
  let look = null; // axes, unit and mask of the frames, from the last whole answer
  let block = null; // {key, first, times, frames: Float32Array, points}
  let coming = null; // promise of the next block
  let position = 0; // in the block
  let autoLimit = 0;
  let playing = 0; // number of the playing that goes on; another number ends it
  let leaving = new AbortController();

  const map = heatMap(figure.picture, {
    label: 'Wavefront. Arrow keys read points, Page Up and Page Down step, Space plays.',
    onCursor: (point) => figure.read(point ? readingAt(point) : null),
    keys: { PageDown: () => step(1), PageUp: () => step(-1), ' ': () => toggle() },
  });
  figure.setHint('Point at the map to read it.');
  const question = createQuestion(api, figure);

  const key = () => `${view.id} ${JSON.stringify(frameParameters(state))}`;
  const frameNumber = () => (block ? block.first + position : 0);
  const values = () => block.frames.subarray(position * block.points, (position + 1) * block.points);
  const limit = () => state.frame_limit ?? autoLimit;

  function readingAt({ row, column }) {
    const value = block.frames[position * block.points + row * look.columns + column];
    const place = `x ${numberText(look.x[column], 3)}, y ${numberText(look.y[row], 3)} ${look.axisUnit}`;
    return `${place}: ${Number.isFinite(value) ? quantityText(numberText(value, 4), look.unit) : 'outside the aperture'}`;
  }

  const model = () => ({
    values: values(),
    rows: look.rows,
    columns: look.columns,
    x: look.x,
    y: look.y,
    axisUnit: look.axisUnit,
    map: diverging,
    low: -limit(),
    high: limit(),
    barTitle: unitText(look.unit) || 'OPD',
  });

  function showPosition() {
    const time = block.times[position];
    const instant = quantityText(steppedText(time, 0.2 / view.frame_rate_hz), 's');
    label.textContent = `frame ${wholeText(frameNumber())} of ${wholeText(view.frames)} · ${instant}`;
    slider.value = String(frameNumber());
    slider.setAttribute('aria-valuetext', `frame ${frameNumber()}, ${numberText(time, 6)} seconds`);
    back.disabled = frameNumber() <= 0;
    forward.disabled = frameNumber() >= view.frames - 1;
  }

  function drawWhole() {
    map.draw(model());
    limits.show(state.frame_limit, [-limit(), limit()]);
    const range = extent(values());
    figure.setFinding(
      range
        ? `OPD from ${numberText(range[0], 3)} to ${quantityText(numberText(range[1], 3), look.unit)}; longer path is positive.`
        : 'No point of this frame has a value.',
    );
    showPosition();
  }

  /** Takes over a block of frames; the limits grow with it, but never while it plays. */
  function takeBlock(next) {
    block = next;
    const range = symmetricLimits(block.frames);
    if (!isPlaying() || autoLimit === 0) autoLimit = Math.max(autoLimit, range[1]);
  }

  function drawAnswer(answer) {
    const { frames, time, frame, x, y } = answer.result.arrays;
    const [, rows, columns] = frames.shape;
    look = { rows, columns, x: x.data, y: y.data, axisUnit: x.unit, unit: frames.unit };
    if (!covers(frame.data[0])) {
      if (block?.key !== key()) autoLimit = 0;
      takeBlock({
        key: key(),
        first: frame.data[0],
        times: time.data,
        frames: Float32Array.from(frames.data, (value) => value ?? NaN),
        points: rows * columns,
      });
      position = 0;
    }
    drawWhole();
    // The window only picks the frame here, so that the steady lensing is not its own goes without saying.
    figure.setWarnings(answer.result.warnings.filter(({ code }) => code !== 'mean-over-record'));
    figure.setOffer({
      answer,
      what: `frame-${frame.data[0]}`,
      arrays: ['frames', 'time', 'x', 'y'],
      table: () =>
        mapTable({
          name: 'opd',
          unit: look.unit,
          axisUnit: look.axisUnit,
          x: look.x,
          y: look.y,
          values: [...values()],
        }),
      drawing: () => {
        const { nodes, height } = mapNodes(model(), { width: 560, palette: paperPalette });
        return { width: 560, height, nodes, title: `Wavefront, ${label.textContent}`, palette: paperPalette };
      },
    });
  }

  /** True when the block in hand holds the frame of this number; then it becomes the position. */
  function covers(number) {
    if (!block || block.key !== key() || number < block.first || number >= block.first + block.times.length)
      return false;
    position = number - block.first;
    return true;
  }

  /** The frame that the state asks for: its own, or the first of the window. */
  function wantedFrame() {
    if (state.frame !== null) return Math.min(view.frames - 1, state.frame);
    if (state.first !== null) return Number(state.first) || 0;
    const start = state.from === null ? 0 : Math.round((Number(state.from) - (view.start_s ?? 0)) * view.frame_rate_hz);
    return Math.min(view.frames - 1, Math.max(0, start || 0));
  }

  const framesPerBlock = () =>
    Math.max(2, Math.min(mostFrames, Math.floor(blockBytes / (4 * view.rows * view.columns))));

  /** Many frames from `first` on, in one reply of plain floats. */
  async function loadBlock(first) {
    const wantedKey = key(),
      wanted = view;
    const last = Math.min(wanted.frames - 1, first + framesPerBlock() - 1);
    const path = (array) =>
      address(api.viewPath(wanted.id, 'frames'), { first, last, ...frameParameters(state), format: 'npy', array });
    const options = { signal: leaving.signal };
    const frames = parseNpy((await api.npy(path('frames'), options)).buffer);
    const times = parseNpy((await api.npy(path('time'), options)).buffer);
    return {
      key: wantedKey,
      first,
      times: times.data,
      frames: Float32Array.from(frames.data),
      points: frames.shape[1] * frames.shape[2],
    };
  }

  /** Goes to a frame, with those about it in one reply when the block does not hold it. */
  async function goToFrame(number) {
    const bounded = Math.min(view.frames - 1, Math.max(0, number));
    if (!covers(bounded)) {
      // Stepping back wants the frames before, stepping on those after.
      const start = bounded < frameNumber() ? Math.max(0, bounded - framesPerBlock() + 1) : bounded;
      try {
        const next = await loadBlock(start);
        if (next.key !== key()) return;
        takeBlock(next);
      } catch (error) {
        if (error.name !== 'AbortError') showFailure();
        return;
      }
    }
    go({ frame: bounded }, { isPassing: true });
  }

  const step = (by) => {
    pause();
    goToFrame(frameNumber() + by);
  };

  /** A failure of a block is shown as any other: the question is put again, and fails or succeeds in the open. */
  function showFailure() {
    question.reset();
    ask();
  }

  const isPlaying = () => play.classList.contains('is-playing');

  function setPlaying(on) {
    play.classList.toggle('is-playing', on);
    part(play, '.play-text', 'panel frames').textContent = on ? 'Pause' : 'Play';
  }

  function pause() {
    if (!isPlaying()) return;
    playing += 1;
    setPlaying(false);
    askSoon();
  }

  /** The block after the one in hand; asked for ahead of time, so that it is there when it is needed. */
  function nextBlock() {
    coming ??= loadBlock(block.first + block.times.length);
    coming.catch(() => {}); // looked at where it is awaited
    return coming;
  }

  /** Goes one frame on, into the next block where this one ends. False at the end of the record. */
  async function advance(isCurrent) {
    if (frameNumber() >= view.frames - 1) return false;
    if (position + 1 >= block.times.length) {
      const next = await nextBlock();
      coming = null;
      if (!isCurrent() || next.key !== key()) return false;
      takeBlock(next);
      position = -1;
    }
    position += 1;
    if (position >= block.times.length / 2 && block.first + block.times.length < view.frames) nextBlock();
    return true;
  }

  async function playOn() {
    const mine = ++playing;
    const isCurrent = () => playing === mine;
    setPlaying(true);
    try {
      if (frameNumber() >= view.frames - 1) await goToFrame(0);
      for (let due = performance.now(); isCurrent() && (await advance(isCurrent));) {
        if (!isCurrent()) return;
        map.repaintValues(values());
        showPosition();
        go({ frame: frameNumber() }, { isPassing: true });
        // What was late is not made up for by a rush.
        due = Math.max(due + 1000 / Number(speed.value), performance.now());
        await new Promise((resolve) => setTimeout(resolve, due - performance.now()));
      }
    } catch (error) {
      coming = null;
      if (error.name !== 'AbortError') showFailure();
    }
    if (isCurrent()) pause();
  }

  const toggle = () => (isPlaying() ? pause() : playOn());

  play.addEventListener('click', () => toggle());
  back.addEventListener('click', () => step(-1));
  forward.addEventListener('click', () => step(1));
  const slide = debounced(40, () => goToFrame(Number(slider.value)));
  slider.addEventListener('input', () => {
    pause();
    label.textContent = `frame ${wholeText(Number(slider.value))} of ${wholeText(view.frames)}`;
    slide();
  });

  /** The frame that the state asks for, whole: with its warnings, its provenance and its address. */
  function ask() {
    const path = address(api.viewPath(view.id, 'frames'), {
      first: wantedFrame(),
      last: wantedFrame(),
      ...frameParameters(state),
    });
    question.put(path, (options) => api.answer(path, options), drawAnswer);
  }
  const askSoon = debounced(350, ask);

  return {
    update(next, subject) {
      if (view?.id !== subject.view.id) {
        pause();
        leaving.abort();
        leaving = new AbortController();
        coming = null;
      }
      state = next;
      view = subject.view;
      slider.max = String(view.frames - 1);
      askSoon.cancel();
      if (look && covers(wantedFrame())) {
        if (!isPlaying()) {
          drawWhole();
          askSoon();
        }
      } else {
        pause();
        ask();
      }
    },
    refresh() {
      question.reset();
    },
    unmount() {
      pause();
      leaving.abort();
      askSoon.cancel();
      question.stop();
      map.destroy();
    },
  };
}
