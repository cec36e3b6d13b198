//! From asked points to values: packs the points of many searches into lanes and counts.
//!
//! Enters: a compiled landscape and points. Leaves: values, gradients, curvatures, shown quantities. Promised: a
//! point's bits do not depend on its lane, its company or the machine. Deliberately absent: any choice of points.
