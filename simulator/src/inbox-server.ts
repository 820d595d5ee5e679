import { inboxPage, messagePage } from './inbox-page.js';
import { objectBody, Refused, type Answer, type Request } from './loopback-server.js';
import type { Mailbox } from './mailbox.js';

/**
 * Answers for reading a mailbox: `GET /` (pages), `GET /messages`, `GET /messages/:id`, `DELETE /messages`,
 * `POST /outage { on }`, `GET /health`.
 */
export function inboxAnswers(mailbox: Mailbox): (request: Request) => Answer {
  const find = (id: string) => {
    const message = mailbox.message(id);
    if (!message) throw new Refused(404, `there is no message "${id}"`);
    return message;
  };
  return ({ method, path, query, body }) => {
    const id = query.get('id');
    if (method === 'GET' && path === '/')
      return { html: id === null ? inboxPage(mailbox.messages()) : messagePage(find(id)) };
    if (method === 'GET' && path === '/health')
      return { json: { status: 'running', messages: mailbox.messages().length, outage: mailbox.outage } };
    if (path === '/messages') {
      if (method === 'GET') return { json: { items: mailbox.messages() } };
      if (method === 'DELETE') {
        mailbox.clear();
        return { json: { items: [] } };
      }
    }
    if (method === 'GET' && path.startsWith('/messages/'))
      return { json: find(path.slice('/messages/'.length)) };
    if (method === 'POST' && path === '/outage') {
      const { on } = objectBody(body, ['on']);
      if (typeof on !== 'boolean')
        throw new Refused(400, 'nothing was changed', [{ path: 'on', message: 'must be true or false' }]);
      mailbox.outage = on;
      return { json: { on } };
    }
    throw new Refused(404, `${method} ${path} is not known here`);
  };
}
