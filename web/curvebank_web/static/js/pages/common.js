// Pages with nothing of their own to do still have the map of keys.
import { keysDialog } from "../panels/keys.js";

keysDialog([["?", "this map"]]);
