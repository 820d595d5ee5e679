import { expect, test } from 'vitest';
import type { Alert } from '../../src/alerts/alert.entity.js';
import { alertMail } from '../../src/alerts/alert-mail.js';

const alert = {
  id: 7,
  rule: 'following-error',
  priority: 'high',
  raisedAt: new Date('2026-07-01T10:00:00Z'),
  message: 'Following error reaches 0.80 mm, allowed 0.50 mm.',
  action: 'Check the parts made since it began.',
  axis: {
    tag: `PR-01 'ram'`,
    name: 'Press <ram> & "guide"',
    machine: { name: 'Press 1' },
    site: { name: 'Tile Hall', timeZone: 'Europe/London' },
  },
} as Alert;

test('what people typed stands for itself in the mail, in text and in HTML', () => {
  const { text, html } = alertMail(alert, 1, 'http://polewright.test', 'http://polewright.test/ack');
  expect(text).toContain(`PR-01 'ram', Press <ram> & "guide". Press 1, Tile Hall`);
  expect(html).toContain('PR-01 &#39;ram&#39;');
  expect(html).toContain('Press &lt;ram&gt; &amp; &quot;guide&quot;.');
  expect(html).not.toContain('<ram>');
  // On the site's clock: 10:00 UTC is 11:00 in London in July.
  expect(text).toContain('11:00');
});
