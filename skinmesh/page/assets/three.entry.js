export {
  AmbientLight, BufferAttribute, BufferGeometry, ColorManagement, DirectionalLight, DoubleSide, LinearSRGBColorSpace,
  LineBasicMaterial, LineSegments, Mesh, MeshLambertMaterial, OrthographicCamera, PerspectiveCamera, Raycaster, Scene, Vector2,
  Vector3, WebGLRenderer,
} from "three";
export { OrbitControls } from "three/examples/jsm/controls/OrbitControls.js";
