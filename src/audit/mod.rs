//! Floor 2: whether each star gets what its planets demand. Statistics alone: the faces choose what
//! to show of them.

mod account;
mod causes;
mod gaps;
mod mass;
mod orbit;
mod phases;
mod programmes;
mod sampling;
mod sensitivity;
mod star;
mod survey;
mod velocity;

pub use account::{Accounts, NightAccount};
pub use causes::{NightFacts, OwedByCause, OwedCause, attribute_owed};
pub use gaps::{GapStatistics, quantile};
pub use mass::{
    EARTHS_PER_JUPITER, JUPITERS_PER_SUN, MassError, earth_irradiation_period_d, msini_earth,
    msini_error, semi_amplitude_m_s,
};
pub use orbit::{EccentricErrors, Measurement, OrbitErrors};
pub use phases::{Evenness, PhaseCoverage, kuiper};
pub use programmes::{ProgrammeUse, programme_use};
pub use sampling::{Alias, Peak, SpectralWindow, aliases, natural_name, window_power};
pub use sensitivity::{Sensitivity, log_spaced_periods, sensitivity};
pub use star::{CandidateAudit, DETECTION_SNR, StarAudit, StarRecord};
pub use survey::{MonthUse, Record, SurveyAudit};
pub use velocity::{ErrorPair, NightErrors, VelocityErrors, VelocityRange};
