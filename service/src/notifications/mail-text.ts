/** What a mail says: lines of text and one place to go. */
export interface MailContent {
  /** Such as "Good day Ines Marlow,". */
  greeting: string;
  paragraphs: string[];
  link: { label: string; url: string };
  /** Small print. */
  closing?: string;
}

/** Text that stands for itself within HTML (HTML Living Standard, 13.1.2.3 and 13.1.2.4). */
export const escapeHtml = (text: string): string =>
  text
    .replaceAll('&', '&amp;')
    .replaceAll('<', '&lt;')
    .replaceAll('>', '&gt;')
    .replaceAll('"', '&quot;')
    .replaceAll("'", '&#39;');

/** The same mail as plain text and as HTML. */
export function composeMail({ greeting, paragraphs, link, closing }: MailContent): {
  text: string;
  html: string;
} {
  const text = [greeting, ...paragraphs, `${link.label}: ${link.url}`, ...(closing ? [closing] : [])].join(
    '\n\n',
  );
  const url = escapeHtml(link.url);
  const html = [
    '<!doctype html><html lang="en"><body style="font-family:sans-serif;line-height:1.5;color:#1d1d1d;max-width:36rem">',
    ...[greeting, ...paragraphs].map((line) => `<p>${escapeHtml(line)}</p>`),
    `<p><a href="${url}">${escapeHtml(link.label)}</a><br><small>${url}</small></p>`,
    ...(closing ? [`<p><small>${escapeHtml(closing)}</small></p>`] : []),
    '</body></html>',
  ].join('\n');
  return { text: `${text}\n`, html };
}

/** Where in its HTML a mail shows its picture. */
export const PICTURE_CID = 'axis@polewright';

export const PERHAPS_AGAIN =
  'You may have had this mail before: the service was stopped while it was going out and cannot know whether it did.';

interface Letters {
  text: string;
  html: string;
}

/** A mail with a line put before all else. */
export const withNotice = ({ text, html }: Letters, notice: string): Letters => ({
  text: `${notice}\n\n${text}`,
  html: atBegin(html, `<p><strong>${escapeHtml(notice)}</strong></p>`),
});

/** A mail with its attached picture above the text; where pictures are not shown, the same in words. */
export const withPicture = ({ text, html }: Letters, words: string): Letters => ({
  text: `${text}\n${words}\n`,
  html: atBegin(
    html,
    `<p><img src="cid:${PICTURE_CID}" alt="${escapeHtml(words)}" width="320" style="max-width:100%"></p>`,
  ),
});

/** Puts something at the begin of a page, or of a part of one. */
const atBegin = (html: string, part: string): string =>
  /<body[^>]*>/.test(html) ? html.replace(/<body[^>]*>/, (body) => body + part) : part + html;
