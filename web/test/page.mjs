// Tests of the page in a real browser before a real daemon.
import { test } from "./bundle.mjs";
await test("page");
