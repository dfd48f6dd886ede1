import { Analysis } from './analysis.ts';
import { Audit } from './audit.ts';
import { Connection, type FairturnOptions } from './connection.ts';
import { Accounts, Labs, Sites, Stations, Tokens } from './places.ts';
import { Report } from './report.ts';
import { Studies } from './studies.ts';
import { Study } from './study.ts';

/** A client of one Fairturn service, with one token. */
export class Fairturn {
  readonly connection: Connection;
  readonly labs: Labs;
  readonly sites: Sites;
  readonly stations: Stations;
  readonly accounts: Accounts;
  readonly tokens: Tokens;
  readonly studies: Studies;
  readonly audit: Audit;

  constructor(options: FairturnOptions) {
    this.connection = new Connection(options);
    this.labs = new Labs(this.connection);
    this.sites = new Sites(this.connection);
    this.stations = new Stations(this.connection);
    this.accounts = new Accounts(this.connection);
    this.tokens = new Tokens(this.connection);
    this.studies = new Studies(this.connection);
    this.audit = new Audit(this.connection);
  }

  /** A study by its id, without asking whether it is there: for stations that know their study. */
  study(studyId: string): Study {
    return new Study(this.connection, studyId);
  }

  analysis(analysisId: string): Analysis {
    return new Analysis(this.connection, analysisId);
  }

  report(reportId: string): Report {
    return new Report(this.connection, reportId);
  }

  /** The same client with another person at the station. */
  withOperator(operator: string): Fairturn {
    return new Fairturn({ ...this.connection.options, operator });
  }
}
