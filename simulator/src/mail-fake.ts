import { inboxAnswers } from './inbox-server.js';
import { serveLoopback } from './loopback-server.js';
import { Mailbox, serveSmtp } from './mailbox.js';
import { numberSetting, stopOnSignals } from './process-settings.js';

/** The demo's mail server as a process of its own. Environment: MAIL_SMTP_PORT, MAIL_HTTP_PORT. */
const smtpPort = numberSetting(process.env, 'MAIL_SMTP_PORT', 4602, 0, 65_535);
const httpPort = numberSetting(process.env, 'MAIL_HTTP_PORT', 4603, 0, 65_535);
const mailbox = new Mailbox();
const refuse =
  (name: string, port: number) =>
  (error: Error): never => {
    console.error(`mail: port ${port} cannot be used (${error.message}); set ${name} to a free one`);
    process.exit(1);
  };
const smtp = await serveSmtp(smtpPort, mailbox).catch(refuse('MAIL_SMTP_PORT', smtpPort));
const inbox = await serveLoopback(httpPort, inboxAnswers(mailbox)).catch(refuse('MAIL_HTTP_PORT', httpPort));
console.log(`mail: SMTP on 127.0.0.1:${smtp.port}, inbox on http://127.0.0.1:${inbox.port}`);

stopOnSignals(async () => {
  await smtp.close();
  await inbox.close();
});
