//! Spurs taken off a skeleton graph, and chains joined where a node no longer branches.
//!
//! A spur is a chain from a branching to a free end. Rule for its length against the local width: common practice, no source; a bump of
//! a wide track's outline makes a spur about as long as half the width, as the skeleton has to get from the middle to the outline.
//! Limit: of two spurs of the same length at one node the first in row-major order goes, so that ties depend on the picture's turn.

use ndarray::ArrayView2;

use super::{Chain, Node, NodeId, Pixel, SkeletonGraph, touch};

impl SkeletonGraph {
    /// Takes off spurs shorter than `factor` (no unit) times the largest `half_width` (px, one value a pixel of the mask) at the branching.
    ///
    /// `half_width` is the distance transform of the thick mask ([`distance`](super::distance::distance)). The rest as in
    /// [`prune`](Self::prune).
    pub fn prune_short(&mut self, half_width: ArrayView2<'_, f32>, factor: f64) {
        self.prune(|spur, branching| {
            let widths = branching.pixels.iter().filter_map(|&pixel| half_width.get(pixel));
            let widest = widths.copied().fold(0.0, f32::max);
            spur.length() < factor * f64::from(widest)
        });
    }

    /// Takes off the spurs that `insignificant(spur, branching)` names, shortest first.
    ///
    /// A branching never loses more than all but two of its chains, so that the fork at the tip of a wide track leaves the longer
    /// prong and no part of the graph vanishes. Then the chains left at it are joined, and what became a longer spur is asked about
    /// again. Chains without a branching and rings stay.
    pub fn prune(&mut self, insignificant: impl Fn(&Chain, &Node) -> bool) {
        loop {
            let mut degrees = self.degrees();
            let mut spurs: Vec<(f64, usize, NodeId)> = Vec::new();
            for (index, chain) in self.chains.iter().enumerate() {
                let branching = match (degrees[chain.start], degrees[chain.end]) {
                    (1, 3..) => chain.end,
                    (3.., 1) => chain.start,
                    _ => continue,
                };
                if insignificant(chain, &self.nodes[branching]) {
                    spurs.push((chain.length(), index, branching));
                }
            }
            spurs.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
            let mut gone = vec![false; self.chains.len()];
            for (_, index, branching) in spurs {
                if degrees[branching] > 2 {
                    degrees[branching] -= 1;
                    gone[index] = true;
                }
            }
            if !gone.contains(&true) {
                return;
            }
            self.remove(&gone);
            self.join_through_nodes();
        }
    }

    /// Removes chains, and the free ends they leave bare.
    fn remove(&mut self, gone: &[bool]) {
        let before = self.degrees();
        let mut index = 0..;
        self.chains.retain(|_| index.next().is_some_and(|index: usize| !gone[index]));
        let after = self.degrees();
        let bare = before.iter().zip(&after).map(|(&before, &after)| before > 0 && after == 0).collect();
        self.drop_nodes(bare);
    }

    /// Joins the two chains at every node that has just two, and puts the graph in order.
    pub(super) fn join_through_nodes(&mut self) {
        let mut at_node = vec![Vec::new(); self.nodes.len()];
        for (index, chain) in self.chains.iter().enumerate() {
            at_node[chain.start].push(index);
            at_node[chain.end].push(index);
        }
        let mut chains: Vec<Option<Chain>> = std::mem::take(&mut self.chains).into_iter().map(Some).collect();
        let mut passed = vec![false; self.nodes.len()];
        for id in 0..self.nodes.len() {
            let &[first, second] = at_node[id].as_slice() else {
                continue;
            };
            if first == second {
                continue;
            }
            let (Some(into), Some(out)) = (chains[first].take(), chains[second].take()) else {
                continue;
            };
            let (into, out) = (into.turned_to_end_at(id), out.turned_to_end_at(id).turned());
            for place in &mut at_node[out.end] {
                if *place == second {
                    *place = first;
                }
            }
            passed[id] = true;
            chains[first] = Some(self.nodes[id].join(into, out));
        }
        self.chains = chains.into_iter().flatten().collect();
        self.drop_nodes(passed);
    }

    /// Drops nodes that no chain uses any more, and brings nodes and chains into their fixed order.
    fn drop_nodes(&mut self, dropped: Vec<bool>) {
        let nodes = std::mem::take(&mut self.nodes);
        let mut kept: Vec<(NodeId, Node)> = nodes.into_iter().enumerate().filter(|(id, _)| !dropped[*id]).collect();
        kept.sort_by(|a, b| a.1.pixels.cmp(&b.1.pixels));
        let mut renamed = vec![0; dropped.len()];
        for (new, (old, _)) in kept.iter().enumerate() {
            renamed[*old] = new;
        }
        self.nodes = kept.into_iter().map(|(_, node)| node).collect();
        for chain in &mut self.chains {
            (chain.start, chain.end) = (renamed[chain.start], renamed[chain.end]);
            if chain.pixels.iter().gt(chain.pixels.iter().rev()) {
                chain.pixels.reverse();
                std::mem::swap(&mut chain.start, &mut chain.end);
            }
        }
        self.chains.sort_by(|a, b| a.pixels.cmp(&b.pixels));
    }
}

impl Chain {
    fn turned(mut self) -> Self {
        self.pixels.reverse();
        Self { pixels: self.pixels, start: self.end, end: self.start }
    }

    fn turned_to_end_at(self, id: NodeId) -> Self {
        if self.end == id { self } else { self.turned() }
    }
}

impl Node {
    /// One chain out of one that ends here and one that starts here, by the shortest way through the node's pixels.
    fn join(&self, into: Chain, out: Chain) -> Chain {
        let mut pixels = into.pixels;
        let mut rest = out.pixels.into_iter();
        if let (Some(from), Some(to)) = (pixels.pop(), rest.next()) {
            pixels.extend(self.way(from, to));
        }
        pixels.extend(rest);
        Chain { pixels, start: into.start, end: out.end }
    }

    /// The shortest way between two of its pixels, both included; `from` alone where they are the same.
    fn way(&self, from: Pixel, to: Pixel) -> Vec<Pixel> {
        let mut reached = vec![(to, to)];
        let mut next = 0;
        while let Some(&(pixel, _)) = reached.get(next) {
            next += 1;
            for &near in self.pixels.iter().filter(|&&near| touch(pixel, near)) {
                if reached.iter().all(|(seen, _)| *seen != near) {
                    reached.push((near, pixel));
                }
            }
        }
        let mut way = vec![from];
        let mut at = from;
        while let Some(&(_, towards)) = reached.iter().find(|(seen, _)| *seen == at && at != to) {
            way.push(towards);
            at = towards;
        }
        way
    }
}

#[cfg(test)]
mod tests {
    use super::super::distance::distance;
    use super::*;
    use crate::trace::{thin::thin, threshold::for_each_component};
    use ndarray::Array2;
    use proptest::prelude::*;

    /// A bar 9 px wide and 61 px long with a bump of 5×5 px on its side.
    fn bumpy_bar() -> Array2<bool> {
        Array2::from_shape_fn((21, 71), |(row, column)| {
            let bar = (6..15).contains(&row) && (5..66).contains(&column);
            bar || ((1..6).contains(&row) && (33..38).contains(&column))
        })
    }

    #[test]
    fn a_bumpy_bar_becomes_one_line() {
        let mask = bumpy_bar();
        let mut graph = SkeletonGraph::from_mask(thin(mask.view()).view());
        assert!(graph.chains.len() > 1, "the bump makes a spur");
        graph.prune_short(distance(mask.view()).view(), 2.0);
        assert_eq!((graph.nodes.len(), graph.chains.len()), (2, 1));
        let length = graph.chains[0].length();
        assert!((length - 52.0).abs() <= 5.0, "between the centres of the last discs, not {length}");
    }

    #[test]
    fn a_long_branch_stays() {
        let mask = Array2::from_shape_fn((60, 61), |(row, column)| {
            (5..10).contains(&row) && (3..58).contains(&column) || (10..55).contains(&row) && (28..33).contains(&column)
        });
        let mut graph = SkeletonGraph::from_mask(thin(mask.view()).view());
        graph.prune_short(distance(mask.view()).view(), 2.0);
        assert_eq!((graph.nodes.len(), graph.chains.len()), (4, 3));
    }

    fn skeletons() -> impl Strategy<Value = Array2<bool>> {
        (1_usize..24, 1_usize..24).prop_flat_map(|shape| {
            proptest::collection::vec(prop::bool::weighted(0.55), shape.0 * shape.1)
                .prop_map(move |pixels| thin(Array2::from_shape_vec(shape, pixels).unwrap().view()))
        })
    }

    proptest! {
        /// A spur never carries a ring or a part of its own: rings (chains − nodes + parts) and parts stay.
        #[test]
        fn pruning_all_spurs_keeps_parts_and_rings(skeleton in skeletons()) {
            let mut graph = SkeletonGraph::from_mask(skeleton.view());
            let surplus = graph.chains.len() as isize - graph.nodes.len() as isize;
            graph.prune(|_, _| true);
            prop_assert_eq!(graph.chains.len() as isize - graph.nodes.len() as isize, surplus);
            let degrees = graph.degrees();
            let is_spur = |chain: &&Chain| degrees[chain.start].min(degrees[chain.end]) == 1
                && degrees[chain.start].max(degrees[chain.end]) > 2;
            prop_assert_eq!(graph.chains.iter().filter(is_spur).count(), 0);
            prop_assert!(graph.chains.iter().all(|chain| chain.pixels.windows(2).all(|pair| touch(pair[0], pair[1]))));
            for_each_component(skeleton.view(), |pixels| {
                let held = graph.nodes.iter().flat_map(|node| &node.pixels);
                let held = held.chain(graph.chains.iter().flat_map(|chain| &chain.pixels));
                assert!(held.into_iter().any(|pixel| pixels.contains(pixel)), "a part vanished");
            });
        }

        #[test]
        fn pruning_nothing_changes_nothing(skeleton in skeletons()) {
            let graph = SkeletonGraph::from_mask(skeleton.view());
            let mut pruned = graph.clone();
            pruned.prune(|_, _| false);
            prop_assert_eq!(pruned, graph);
        }
    }
}
