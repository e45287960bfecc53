//! The overlap graph as a graph of the petgraph library, built only on demand.

use crate::clock::Span;
use petgraph::graph::{NodeIndex, UnGraph};

/// An overlap graph; vertex `i` is span `i`.
#[derive(Clone, Debug)]
pub struct Graph {
    /// The graph.
    pub graph: UnGraph<usize, ()>,
    /// Whether edges were left out because there are more than was asked for.
    pub cut: bool,
}

/// Which spans overlap which, with at most `most` edges.
pub fn overlap_graph(spans: &[Span], most: usize) -> Graph {
    let mut graph = UnGraph::with_capacity(spans.len(), 0);
    for at in 0..spans.len() {
        graph.add_node(at);
    }
    let mut order: Vec<usize> = (0..spans.len()).collect();
    order.sort_unstable_by_key(|at| spans[*at]);
    let mut running: Vec<usize> = Vec::new();
    for at in order {
        running.retain(|other| spans[*other].end > spans[at].start);
        for other in &running {
            if graph.edge_count() == most {
                return Graph { graph, cut: true };
            }
            graph.add_edge(NodeIndex::new(*other), NodeIndex::new(at), ());
        }
        running.push(at);
    }
    Graph { graph, cut: false }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::clock::Instant;
    use crate::overlap::{components, largest_load};
    use petgraph::algo::{connected_components, dsatur_coloring};
    use proptest::prelude::*;

    proptest! {
        // The petgraph library is the outside reference here: its components, and its
        // DSATUR colouring (Brelaz 1979), checked for validity and never below the clique.
        #[test]
        fn agrees_with_pairwise_overlap_and_the_graph_library(
            raw in prop::collection::vec((0i64..40, 1i64..15), 0..20)
        ) {
            let spans: Vec<Span> = raw.iter().map(|(s, l)| Span::lasting(Instant(*s), *l)).collect();
            let built = overlap_graph(&spans, usize::MAX);
            prop_assert!(!built.cut);
            for a in 0..spans.len() {
                for b in 0..a {
                    let edge = built.graph.contains_edge(NodeIndex::new(a), NodeIndex::new(b));
                    prop_assert_eq!(edge, spans[a].overlaps(spans[b]));
                }
            }
            prop_assert_eq!(connected_components(&built.graph), components(&spans).len());
            let (colours, count) = dsatur_coloring(&built.graph);
            for edge in built.graph.edge_indices() {
                let (a, b) = built.graph.edge_endpoints(edge).unwrap();
                prop_assert_ne!(colours[&a], colours[&b]);
            }
            if !spans.is_empty() {
                prop_assert!(count >= largest_load(&spans));
            }
        }
    }

    #[test]
    fn a_very_large_graph_says_that_it_is_cut() {
        let spans = vec![Span::lasting(Instant(0), 10); 10];
        let built = overlap_graph(&spans, 20);
        assert!(built.cut);
        assert_eq!(built.graph.edge_count(), 20);
        assert!(!overlap_graph(&spans, 45).cut);
    }
}
