// Unit tests of the pure core.
import { test } from "./bundle.mjs";
await test("core");
