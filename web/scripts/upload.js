// The Loads page's upload: one file after the other goes to the drop folder, and
// the page is read again when they are in.
export function startUpload() {
  const form = document.getElementById('upload');
  if (!form) return;
  const said = document.getElementById('upload-said');
  const button = form.querySelector('button');
  form.addEventListener('submit', async (event) => {
    event.preventDefault();
    const files = [...form.elements.files.files];
    button.disabled = true;
    const refused = [];
    for (const [i, file] of files.entries()) {
      said.textContent = `Sending ${file.name}, ${i + 1} of ${files.length}.`;
      const why = await send(form.dataset.to, file);
      if (why) refused.push(`${file.name}: ${why}`);
    }
    button.disabled = false;
    if (refused.length > 0) {
      said.textContent = `${files.length - refused.length} of ${files.length} sent. ${refused.join(' ')}`;
      return;
    }
    said.textContent = `${files.length} sent; they stand below within seconds.`;
    setTimeout(() => location.assign('/loads'), 3000);
  });
}

async function send(to, file) {
  try {
    const answer = await fetch(`${to}?name=${encodeURIComponent(file.name)}`, { method: 'POST', headers: { 'Content-Type': 'application/octet-stream' }, body: file });
    if (answer.ok) return '';
    return (await answer.json()).detail ?? `the server answered ${answer.status}.`;
  } catch (err) {
    return `the server does not answer (${err.message}).`;
  }
}
