// Forgets the draft of the round whose verdict this page shows: it is on record.

import { dropRound } from "./draft.js";

const round = /\/round\/([0-9a-f-]{36})$/.exec(location.pathname);
if (round) dropRound(round[1]);
