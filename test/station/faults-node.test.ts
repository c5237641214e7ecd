import { testFaults } from '../support/fault-tests.ts';

testFaults('node', 20_263);
