// Dark or light: by the system, or as chosen here. The one thing the page remembers in the browser, as it is taste and
// not content.

const key = 'bentlight-theme';

function stored() {
  try {
    return localStorage.getItem(key) ?? 'system';
  } catch {
    return 'system'; // storage may be forbidden; then the choice holds for this page
  }
}

function apply(choice) {
  if (choice === 'system') delete document.documentElement.dataset.theme;
  else document.documentElement.dataset.theme = choice;
}

/**
 * @param {HTMLSelectElement} select
 * @param {() => void} repaint  canvases do not follow CSS by themselves
 */
export function followTheme(select, repaint) {
  select.value = stored();
  apply(select.value);
  select.addEventListener('change', () => {
    apply(select.value);
    try {
      localStorage.setItem(key, select.value);
    } catch {
      // as above
    }
    repaint();
  });
  for (const query of ['(prefers-color-scheme: dark)', '(forced-colors: active)'])
    matchMedia(query).addEventListener('change', repaint);
  addEventListener('beforeprint', () => {
    document.documentElement.dataset.theme = 'light';
    repaint();
  });
  addEventListener('afterprint', () => {
    apply(select.value);
    repaint();
  });
}
