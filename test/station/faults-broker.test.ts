import { testFaults } from '../support/fault-tests.ts';

testFaults('broker', 20_262);
