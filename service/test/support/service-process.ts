import { spawn, type ChildProcess } from 'node:child_process';
import { existsSync } from 'node:fs';
import { fileURLToPath } from 'node:url';

const MAIN = fileURLToPath(new URL('../../dist/main.js', import.meta.url));
const STARTS_WITHIN_MS = 30_000;

/** The built service as its own process. */
export interface ServiceProcess {
  url: string;
  /** Ends it without a chance to say good-bye, as a power cut would. */
  kill: () => Promise<void>;
  /** Asks it to end in order. */
  stop: () => Promise<number | null>;
}

/** Starts `dist/main.js` over a data folder; `npm test` builds it before. */
export async function startProcess(dataFolder: string): Promise<ServiceProcess> {
  if (!existsSync(MAIN)) throw new Error('the service is not built: npm run build -w service');
  const child = spawn(
    process.execPath,
    // For a profile of it: PROFILE_DIR names the folder.
    [...(process.env.PROFILE_DIR ? ['--cpu-prof', `--cpu-prof-dir=${process.env.PROFILE_DIR}`] : []), MAIN],
    {
      env: {
        PATH: process.env.PATH,
        PORT: '0',
        DATA_DIR: dataFolder,
        DEMO: '1',
        SMTP_URL: 'smtp://127.0.0.1:1',
      },
      stdio: ['ignore', 'pipe', 'pipe'],
    },
  );
  const url = await listening(child);
  const ended = new Promise<number | null>((resolve) => child.once('exit', (code) => resolve(code)));
  const end = (signal: 'SIGKILL' | 'SIGTERM'): Promise<number | null> => {
    child.kill(signal);
    return ended;
  };
  return { url, kill: async () => void (await end('SIGKILL')), stop: () => end('SIGTERM') };
}

function listening(child: ChildProcess): Promise<string> {
  let said = '';
  return new Promise((resolve, reject) => {
    const late = setTimeout(() => {
      child.kill('SIGKILL');
      reject(new Error(`the service did not start:\n${said}`));
    }, STARTS_WITHIN_MS);
    const listen = (text: Buffer): void => {
      said += text.toString();
      const address = /Polewright service at (\S+)/.exec(said);
      if (!address) return;
      clearTimeout(late);
      resolve(address[1]!);
    };
    child.stdout!.on('data', listen);
    child.stderr!.on('data', listen);
    child.once('exit', (code) => {
      clearTimeout(late);
      reject(new Error(`the service ended with ${code}:\n${said}`));
    });
  });
}
