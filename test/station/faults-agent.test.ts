import { testFaults } from '../support/fault-tests.ts';

testFaults('agent', 20_261);
