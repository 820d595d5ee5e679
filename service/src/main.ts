import { NestFactory } from '@nestjs/core';
import type { NestExpressApplication } from '@nestjs/platform-express';
import { AppModule } from './app.module.js';
import { damageOf } from './database/damage.js';
import { InvitationService } from './people/invitation.service.js';
import { readSettings, SettingsError, type Settings } from './settings.js';
import { setup } from './setup.js';

/** Exit codes that `npm start` turns into plain words. */
const BAD_SETTINGS = 2;
const PORT_TAKEN = 3;
const BAD_DATABASE = 4;

function settingsOrExit(): Settings {
  try {
    return readSettings(process.env);
  } catch (error) {
    if (!(error instanceof SettingsError)) throw error;
    console.error(error.message);
    process.exit(BAD_SETTINGS);
  }
}

const settings = settingsOrExit();
const damage = damageOf(settings.DATABASE, settings.DATA_DIR);
if (damage !== null) {
  console.error(damage);
  process.exit(BAD_DATABASE);
}
const app = await NestFactory.create<NestExpressApplication>(AppModule.with(settings), {
  logger: ['error', 'warn', 'log'],
});
app.disable('x-powered-by');
setup(app);
try {
  await app.listen(settings.PORT, settings.HOST);
} catch (error) {
  if ((error as NodeJS.ErrnoException).code !== 'EADDRINUSE') throw error;
  console.error(`Port ${settings.PORT} is taken. Stop what uses it or set PORT to another one.`);
  process.exit(PORT_TAKEN);
}
const firstLink = await app.get(InvitationService).createFirst();
if (firstLink) console.log(`No one can sign in yet. Become the first administrator at ${firstLink}`);
console.log(`Polewright service at ${await app.getUrl()}`);
