import { Audit } from './audit.ts';
import { Connection, type FairturnOptions } from './connection.ts';
import { Accounts, Labs, Sites, Stations, Tokens } from './places.ts';

/** A client of one Fairturn service, with one token. */
export class Fairturn {
  readonly connection: Connection;
  readonly labs: Labs;
  readonly sites: Sites;
  readonly stations: Stations;
  readonly accounts: Accounts;
  readonly tokens: Tokens;
  readonly audit: Audit;

  constructor(options: FairturnOptions) {
    this.connection = new Connection(options);
    this.labs = new Labs(this.connection);
    this.sites = new Sites(this.connection);
    this.stations = new Stations(this.connection);
    this.accounts = new Accounts(this.connection);
    this.tokens = new Tokens(this.connection);
    this.audit = new Audit(this.connection);
  }

  /** The same client with another person at the station. */
  withOperator(operator: string): Fairturn {
    return new Fairturn({ ...this.connection.options, operator });
  }
}
