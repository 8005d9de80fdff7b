//! The project against the outside; each module names what it is compared with.

#[cfg(test)]
mod kkt;
#[cfg(test)]
mod ledgers;
#[cfg(test)]
mod oxidation_states;
#[cfg(test)]
mod processes;
#[cfg(test)]
mod properties;
#[cfg(test)]
mod published;
#[cfg(test)]
mod random_systems;
#[cfg(test)]
mod redox;
#[cfg(test)]
mod reference_materials;
#[cfg(test)]
mod refusals;
#[cfg(test)]
mod reproducible;
#[cfg(test)]
mod round_trips;
#[cfg(test)]
mod seawater;
#[cfg(test)]
mod sensitivities;
#[cfg(test)]
mod tableaux;
#[cfg(test)]
mod tidy;
#[cfg(test)]
mod two_routes;
#[cfg(test)]
mod uncertainty;
#[cfg(test)]
mod waters;
