import { escapeHtml } from '../notifications/mail-text.js';
import type { Alert } from './alert.entity.js';
import { RULE_TITLES } from './rules.js';

/**
 * The mail about an alert that nobody has acknowledged: what, where, what to do, and the ways to acknowledge it.
 *
 * @param acknowledgeUrl a page that asks once more and needs no sign-in
 */
export function alertMail(
  alert: Alert,
  step: number,
  publicUrl: string,
  acknowledgeUrl: string,
): { subject: string; text: string; html: string } {
  const { axis } = alert;
  const link = `${publicUrl}/alerts/${alert.id}`;
  const where = `${axis.machine.name}, ${axis.site.name}`;
  const since = alert.raisedAt.toLocaleString('en-GB', {
    timeZone: axis.site.timeZone,
    dateStyle: 'medium',
    timeStyle: 'short',
  });
  const again = step > 1 ? ` (mail ${step}: still not acknowledged)` : '';
  const subject = `${axis.tag}: ${RULE_TITLES[alert.rule]}${again}`;
  const lines = [
    `${axis.tag}, ${axis.name}. ${where}`,
    `${alert.message}`,
    `Since ${since} (${axis.site.timeZone}), priority ${alert.priority}, not acknowledged.`,
    `Do: ${alert.action}`,
  ];
  const safety =
    'Machines can move unexpectedly. Follow the site’s lockout and machine-safety procedures and local codes.';
  return {
    subject,
    text: `${lines.join('\n\n')}\n\nAcknowledge: ${acknowledgeUrl}\n\nOpen the alert: ${link}\n\n${safety}\n`,
    html: `<div style="font:16px/1.5 'Work Sans',Arial,sans-serif;color:#1C2733;max-width:560px">
<h1 style="font-size:20px;margin:0 0 4px">${escapeHtml(axis.tag)}: ${escapeHtml(RULE_TITLES[alert.rule])}</h1>
<p style="margin:0 0 14px;color:#5B6672">${escapeHtml(axis.name)}. ${escapeHtml(where)}</p>
<p style="margin:0 0 10px"><strong>${escapeHtml(alert.message)}</strong></p>
<p style="margin:0 0 10px">${escapeHtml(lines[2]!)}</p>
<p style="margin:0 0 18px">${escapeHtml(lines[3]!)}</p>
<p style="margin:0 0 14px"><a href="${escapeHtml(acknowledgeUrl)}" style="background:#1F7A6D;color:#fff;padding:12px 20px;border-radius:4px;text-decoration:none;font-weight:600">Acknowledge …</a></p>
<p style="margin:0 0 18px"><a href="${escapeHtml(link)}">Open the alert</a></p>
<p style="margin:0;color:#5B6672;font-size:13px">${escapeHtml(safety)}</p></div>`,
  };
}
