//! Values with a unit and a standard uncertainty, propagated with correlation (JCGM 100:2008).
