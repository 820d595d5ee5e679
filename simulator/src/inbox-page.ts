import type { Message } from './mailbox.js';

const ESCAPES: Record<string, string> = {
  '&': '&amp;',
  '<': '&lt;',
  '>': '&gt;',
  '"': '&quot;',
  "'": '&#39;',
};
const escape = (text: string): string => text.replace(/[&<>"']/g, (c) => ESCAPES[c]!);

const STYLE = `
:root { color-scheme: light dark; --ground: #f6f4ef; --surface: #fffefb; --ink: #1c2733; --soft: #55606b;
  --rule: #d9d4c7; --press: #1f7a6d; }
@media (prefers-color-scheme: dark) {
  :root { --ground: #171b20; --surface: #1f252c; --ink: #e9e5da; --soft: #a9b0b6; --rule: #3a424b; --press: #63c0b1; } }
* { box-sizing: border-box; }
body { margin: 0; background: var(--ground); color: var(--ink); font: 16px/1.5 'Work Sans', system-ui, sans-serif;
  font-variant-numeric: tabular-nums; }
main { max-width: 60rem; margin: 0 auto; padding: 1.5rem 1rem 3rem; }
h1 { font-size: 1.4rem; margin: 0 0 .25rem; } h2 { font-size: 1.15rem; margin: 0 0 .5rem; }
p.about { margin: 0 0 1.5rem; color: var(--soft); }
ol { list-style: none; margin: 0; padding: 0; border-top: 1px solid var(--rule); }
li { border-bottom: 1px solid var(--rule); }
li a { display: grid; grid-template-columns: 13rem 1fr; gap: .1rem 1rem; padding: .7rem .5rem; color: inherit;
  text-decoration: none; }
li a:hover { background: var(--surface); } a { color: var(--press); }
a:focus-visible { outline: 3px solid var(--press); outline-offset: 2px; }
li time, li .to { color: var(--soft); font-size: .875rem; } li .subject { font-weight: 600; }
li .to { grid-column: 2; }
article { background: var(--surface); border: 1px solid var(--rule); padding: 1.25rem; }
dl { display: grid; grid-template-columns: auto 1fr; gap: .15rem 1rem; margin: 0 0 1rem; } dt { color: var(--soft); }
dd { margin: 0; overflow-wrap: anywhere; } pre { white-space: pre-wrap; overflow-wrap: anywhere; font: inherit; }
iframe { width: 100%; height: 32rem; border: 1px solid var(--rule); background: #fff; }
@media (max-width: 40rem) { li a { grid-template-columns: 1fr; } li .to { grid-column: 1; } }`;

function page(title: string, body: string): string {
  return `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'; img-src data:">
<title>${escape(title)}</title>
<style>${STYLE}</style>
</head>
<body><main>${body}</main></body>
</html>`;
}

const utc = (at: string): string => `${at.slice(0, 19).replace('T', ' ')} UTC`;

/** The list of messages as a page without scripts. */
export function inboxPage(messages: readonly Message[]): string {
  const items = messages
    .map(
      ({ id, at, to, subject }) =>
        `<li><a href="/?id=${encodeURIComponent(id)}"><time datetime="${at}">${utc(at)}</time>` +
        `<span class="subject">${escape(subject || '(no subject)')}</span>` +
        `<span class="to">to ${escape(to)}</span></a></li>`,
    )
    .join('\n');
  return page(
    `Inbox (${messages.length})`,
    `<h1>Tarnwick inbox</h1>
<p class="about">Mail that the demo has sent. It stays on this computer and is forgotten when the demo ends.</p>
${messages.length === 0 ? '<p>No mail yet. An alert that nobody acknowledges in time arrives here.</p>' : `<ol>${items}</ol>`}`,
  );
}

/** One message; its HTML is shown in a sandbox of its own, where links open in a new tab. */
export function messagePage({ at, from, to, subject, text, html }: Message): string {
  const content = html
    ? `<iframe title="Message" sandbox="allow-popups allow-popups-to-escape-sandbox" srcdoc="${escape(`<base target="_blank">${html}`)}"></iframe>`
    : `<pre>${escape(text)}</pre>`;
  return page(
    subject || '(no subject)',
    `<p><a href="/">All mail</a></p>
<article><h2>${escape(subject || '(no subject)')}</h2>
<dl><dt>From</dt><dd>${escape(from)}</dd><dt>To</dt><dd>${escape(to)}</dd><dt>At</dt><dd>${utc(at)}</dd></dl>
${content}</article>`,
  );
}
