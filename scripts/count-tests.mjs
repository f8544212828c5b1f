// Print "N passed, N failed" from vitest's JSON report: node scripts/count-tests.mjs REPORT STATUS.
// A file that fails to import has failed but holds no tests, and counts as one failure.
import { readFileSync } from "node:fs";

const [file, status] = process.argv.slice(2);
const report = JSON.parse(readFileSync(file, "utf8"));
const broken = report.testResults.filter(
  (suite) => suite.status === "failed" && suite.assertionResults.length === 0,
);
const failed = report.numFailedTests + broken.length;
for (const suite of broken) console.log(`failed to import: ${suite.name}\n${suite.message}`);
const skipped = report.numPendingTests + report.numTodoTests;
console.log(`${report.numPassedTests} passed, ${failed} failed${skipped ? `, ${skipped} skipped` : ""}`);
if (failed || !report.success || status !== "0" || report.numPassedTests === 0) process.exitCode = 1;
