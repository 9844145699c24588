/**
 * The page as one document: nothing is loaded beside it, and its policy lets nothing run or load but what stands in it, which
 * its digests name (Content Security Policy Level 3).
 */
import { createHash } from 'node:crypto';
import { ADVISORY } from '@stillwell/protocol';
import { CLIENT_TEXT } from './client-text.ts';
import { STYLE } from './style.ts';

/** A page and what a browser may do with it. */
export interface PageDocument {
  readonly html: Uint8Array;
  readonly policy: string;
  /** Of the whole text: another one is another page. */
  readonly digest: string;
}

/** A tank with its level and what comes next; our own drawing. */
const ICON =
  '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 32 32"><rect width="32" height="32" rx="7" fill="#1d6f86"/>' +
  '<path d="M5 20 C9 12 12 24 16 17" fill="none" stroke="#fff" stroke-width="2.6" stroke-linecap="round"/>' +
  '<path d="M16 17 L27 8 L27 20 Z" fill="#fff" fill-opacity=".55"/></svg>';

let made: PageDocument | null = null;

/** The page, made when it is first asked for. */
export function pageDocument(): PageDocument {
  made ??= make();
  return made;
}

function make(): PageDocument {
  const html = `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="color-scheme" content="light dark">
<title>stillwell gateway</title>
<link rel="icon" href="data:image/svg+xml,${encodeURIComponent(ICON)}">
<style>${STYLE}</style>
</head>
<body>
<noscript><p class="plain">This page draws what the gateway sends, and needs its own script for that.
Without it, read <a href="/state.json">state.json</a> or <a href="/metrics">metrics</a>.</p></noscript>
<div id="page"></div>
<footer><p>${ADVISORY}</p><p>Local codes and licensed practice decide.</p></footer>
<script>${CLIENT_TEXT}</script>
</body>
</html>
`;
  const bytes = Buffer.from(html);
  const policy = [
    "default-src 'none'",
    `script-src '${digestOf(CLIENT_TEXT)}'`,
    `style-src '${digestOf(STYLE)}'`,
    "connect-src 'self'",
    'img-src data:',
    "base-uri 'none'",
    "form-action 'none'",
    "frame-ancestors 'none'",
    "require-trusted-types-for 'script'",
  ].join('; ');
  return { html: bytes, policy, digest: createHash('sha256').update(bytes).digest('hex').slice(0, 16) };
}

function digestOf(text: string): string {
  return `sha256-${createHash('sha256').update(text).digest('base64')}`;
}
