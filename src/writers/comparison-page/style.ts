import base from "./base.css?raw";
import narrow from "./narrow.css?raw";
import pair from "./pair.css?raw";
import parts from "./parts.css?raw";
import print from "./print.css?raw";
import table from "./table.css?raw";

/** What comes later wins: narrow windows over the parts, paper over everything. */
export const style = [base, table, pair, parts, narrow, print].join("\n");
