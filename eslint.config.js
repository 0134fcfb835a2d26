import js from '@eslint/js';
import tseslint from 'typescript-eslint';

/** The rooms of src/ in the order in which data passes through them: a room imports only from earlier ones. */
const ROOMS = [
  'numerics',
  'parallel',
  'snapshot',
  'octree',
  'models',
  'dynamics',
  'survey',
  'settling',
  'figures',
  'gate',
  'report',
  'scale',
  'cli',
];

const roomRules = ROOMS.map((room, index) => ({
  files: [`src/${room}/**/*.ts`],
  rules: {
    'no-restricted-imports': [
      'error',
      {
        patterns: [
          {
            group: [
              ...ROOMS.slice(index + 1).flatMap((later) => [`../${later}/*`, `../../${later}/*`]),
              '../index.ts',
              '../../index.ts',
            ],
            message: `The room "${room}" may import only from rooms before it (see DEVELOPERS.md).`,
          },
        ],
      },
    ],
  },
}));
// The command line has no physics of its own: it may use the public library and its own files.
roomRules[ROOMS.indexOf('cli')].rules = {
  'no-restricted-imports': ['off'],
};

export default tseslint.config(
  { ignores: ['dist/', 'coverage/', 'node_modules/', 'test/e2e/consumer/'] },
  js.configs.recommended,
  {
    files: ['**/*.ts'],
    extends: [...tseslint.configs.recommendedTypeChecked],
    languageOptions: {
      parserOptions: { projectService: true, tsconfigRootDir: import.meta.dirname },
    },
    rules: {
      '@typescript-eslint/consistent-type-imports': 'error',
      '@typescript-eslint/no-floating-promises': 'error',
      '@typescript-eslint/restrict-template-expressions': [
        'error',
        { allowNumber: true, allowBoolean: true },
      ],
      '@typescript-eslint/switch-exhaustiveness-check': 'error',
      eqeqeq: 'error',
    },
  },
  {
    files: ['**/*.js', '**/*.mjs'],
    languageOptions: {
      globals: {
        process: 'readonly',
        console: 'readonly',
        URL: 'readonly',
        performance: 'readonly',
        Buffer: 'readonly',
        setTimeout: 'readonly',
        SharedArrayBuffer: 'readonly',
      },
    },
  },
  ...roomRules,
);
