// The wafer page's form: without script it loads the page anew; with script the
// same page is fetched and its parts are exchanged, so that the map stays where
// it is and a specification re-bins at once.

export function startChooser(map) {
  const form = document.getElementById('chooser');
  if (!form) return;
  let fetching = null;

  const show = async (url, keep) => {
    fetching?.abort();
    fetching = new AbortController();
    const { signal } = fetching;
    document.body.setAttribute('aria-busy', 'true');
    try {
      const answer = await fetch(url, { signal, headers: { Accept: 'text/html' } });
      if (!answer.ok) throw new Error(`the server answered ${answer.status}`);
      const next = new DOMParser().parseFromString(await answer.text(), 'text/html');
      exchange(next);
      if (keep) history.replaceState(null, '', url);
      document.dispatchEvent(new CustomEvent('parts'));
      await map?.show();
    } catch (err) {
      if (err.name !== 'AbortError') window.location.assign(url);
    } finally {
      if (!signal.aborted) document.body.removeAttribute('aria-busy');
    }
  };

  form.addEventListener('change', (event) => {
    const fields = new URLSearchParams(new FormData(form));
    // Another measurement has quantities and bins of its own.
    if (event.target.name === 'measurement') {
      fields.delete('quantity');
      fields.delete('specification');
    }
    if (event.target.name === 'quantity') fields.set('view', 'quantity');
    if (event.target.name === 'specification') fields.set('view', 'bins');
    show(`${form.action.split('?')[0]}?${fields}`, true);
  });
  form.querySelector('button[type=submit]').hidden = true;
}

function exchange(next) {
  const focused = document.activeElement?.name;
  const value = document.activeElement?.value;
  for (const part of document.querySelectorAll('[data-part]')) {
    const fresh = next.querySelector(`[data-part="${part.dataset.part}"]`);
    if (fresh) part.replaceWith(document.importNode(fresh, true));
  }
  if (!focused) return;
  const again = [...document.getElementsByName(focused)];
  (again.find((e) => e.value === value) ?? again[0])?.focus();
}
