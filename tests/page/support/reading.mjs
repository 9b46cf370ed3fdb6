// The interface read directly, to compare with what the page shows.

/** JSON of an address of the service, waited for when it is long work. */
export async function read(site, path) {
  const response = await fetch(site.url + path, { headers: { Prefer: 'wait=30' } });
  if (response.status !== 200) throw new Error(`${path}: ${response.status} ${await response.text()}`);
  return response.json();
}

/** Views of the demo's tunnel run that have no checks to look at, and the run's id. */
export async function tunnelRun(site) {
  const { items: runs } = await read(site, '/v1/runs');
  const run = runs.find(({ source }) => source === 'tunnel');
  const { items: views } = await read(site, `/v1/views?run=${run.id}&limit=500`);
  return { run, views };
}

/** A number as the page writes it, back as a number. */
export const parsed = (text) => Number(text.replace(/\u2212/g, '-').replace(/[\u2009\u00a0]/g, ''));
