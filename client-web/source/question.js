// One question kept in step with the state: asks, supersedes, shows the face that fits, and tries again when the line
// was lost. Every panel that shows an answer goes through here, so that all of them behave alike.

import { ApiError, ConnectionError } from './api.js';
import { begin } from './busy.js';
import { jobFace, lostFace, refusalFace, workingFace } from './faces.js';

const patienceMilliseconds = 300; // work shorter than that needs no announcement
const retrySeconds = 5;

/**
 * @typedef {{showFace: (face: ?Node) => void, setStale: (isStale: boolean) => void, hasPicture: () => boolean,
 *            setRefused: () => void}} Host  where the answer, or what stands for it, is shown
 *
 * @param {import('./api.js').createApi} api
 * @param {Host} host
 */
export function createQuestion(api, host) {
  let controller = null;
  let current = null; // key of what is asked or shown
  let retryTimer = null;

  function stop() {
    controller?.abort();
    controller = null;
    clearTimeout(retryTimer);
  }

  function failed(error, again) {
    if (error.name === 'AbortError') return;
    current = null;
    if (error instanceof ApiError) {
      host.setRefused();
      const face = refusalFace(error);
      host.showFace(face);
      face.dispatchEvent(new CustomEvent('refusal', { bubbles: true, detail: error }));
      return;
    }
    if (!(error instanceof ConnectionError)) throw error;
    const seconds = error.retryAfter ?? retrySeconds;
    host.setStale(true);
    host.showFace(lostFace(error, { seconds, hasOld: host.hasPicture(), retry: again }));
    retryTimer = setTimeout(again, seconds * 1000);
  }

  return {
    /**
     * Asks, unless the same is being asked or shown already.
     *
     * @template T
     * @param {string} key
     * @param {(options: {signal: AbortSignal, onProgress: Function}) => Promise<T>} ask
     * @param {(answer: T) => void} draw
     */
    async put(key, ask, draw) {
      if (key === current) return;
      stop();
      current = key;
      const mine = (controller = new AbortController());
      const end = begin();
      const again = () => {
        current = null;
        this.put(key, ask, draw);
      };
      const late = setTimeout(() => {
        host.setStale(true);
        host.showFace(workingFace());
      }, patienceMilliseconds);
      let job = null;
      const onProgress = (state) => {
        if (mine.signal.aborted) return;
        clearTimeout(late);
        if (!job) {
          job = jobFace(() => api.cancel(state).catch(() => {}));
          host.setStale(true);
          host.showFace(job.face);
        }
        job.tell(state);
      };
      try {
        const answer = await ask({ signal: mine.signal, onProgress });
        if (mine.signal.aborted) return;
        clearTimeout(late);
        host.showFace(null);
        host.setStale(false);
        draw(answer);
      } catch (error) {
        clearTimeout(late);
        if (!mine.signal.aborted) failed(error, again);
      } finally {
        end();
      }
    },
    /** Forgets what is shown, so that the next put asks again. */
    reset() {
      stop();
      current = null;
    },
    stop,
  };
}
