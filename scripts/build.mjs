import { build, checkNode, install } from './workspace.mjs';

checkNode();
install();
build({ force: true });
