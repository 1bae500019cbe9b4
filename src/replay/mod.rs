//! The launch model beside a trial: residuals, and later fits, transfer, trends.
